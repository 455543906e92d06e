import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import type { Levels } from "./cell_levels.js";
import { SIDE } from "./cells.js";
import type { Pixels, RowCorrection } from "./pixels.js";
import type { PureCells } from "./pure.js";
import { fitRows, type JointRows, type RowMeasurements } from "./row_smoother.js";

/** A row with fewer pure pixels has no measurement of its own. */
const LEAST_IN_ROW = 4;
const CLIP2 = 16;
/** A gradient along the columns is taken off when it stands out by this many standard deviations. */
const COLUMN_SIGMAS = 3;

export interface RowRefinement {
  readonly correction: RowCorrection;
  readonly gain: JointRows;
  readonly phase: JointRows;
}

/** Noise of one state along its own level (amplitude) and across it (phase), as variances. */
function radialAndAcross(level: ComplexValue, c: NoiseCovariance): [number, number] {
  const m2 = Math.max(level.re * level.re + level.im * level.im, 1e-30);
  const cross = (2 * c.ri * level.re * level.im) / m2;
  const radial = (c.rr * level.re * level.re + c.ii * level.im * level.im) / m2 + cross;
  const across = (c.rr * level.im * level.im + c.ii * level.re * level.re) / m2 - cross;
  const least = 1e-12 * m2;
  return [Math.max(radial, least), Math.max(across, least)];
}

/** What is left of the gain and phase of each row, from pixels of known state: z/z_expected averaged along the row with the weights of
 *  the noise, then smoothed along the rows by its measured variance. The mean over the rows is left to the levels.
 *  @param z the frame with `before` already taken off
 *  @param inflation pixels per independent pixel along a row
 *  @returns the whole correction, `before` included */
export function refineRows(
  z: Pixels,
  pure: PureCells,
  levels: Levels,
  noise: readonly [NoiseCovariance, NoiseCovariance],
  before: RowCorrection,
  inflation: number,
): RowRefinement {
  const { rows } = z;
  const parts = [radialAndAcross(levels[0], noise[0]), radialAndAcross(levels[1], noise[1])] as const;
  const measurements = (): RowMeasurements => ({
    value: [new Float64Array(rows), new Float64Array(rows)],
    weight: [new Float64Array(rows), new Float64Array(rows)],
  });
  const gain = measurements();
  const phase = measurements();
  // moments along the columns, for a gradient: Σ w x², Σ w x y with the row's mean taken out
  let [gxx, gxy, pxx, pxy] = [0, 0, 0, 0];
  const sums = [new Float64Array(SUMS), new Float64Array(SUMS)] as const;
  for (let i = 0; i < rows; i++) {
    sumRow(sums, i, z, pure, levels, parts);
    if (sums[0][N] + sums[1][N] < LEAST_IN_ROW) continue;
    // the weights of a pixel are |z_expected|² over the variance along or across it
    let [wg, sg, xg, xxg, xyg, wp, sp, xp, xxp, xyp] = [0, 0, 0, 0, 0, 0, 0, 0, 0, 0];
    for (const k of [0, 1] as const) {
      const s = sums[k];
      if (s[N] === 0) continue;
      const [radial, across] = parts[k];
      gain.value[k][i] = before.logGain[i] + Math.log1p(Math.max(-0.9, s[G] / s[W]));
      gain.weight[k][i] = s[W] / radial / inflation;
      phase.value[k][i] = before.phaseRad[i] + s[F] / s[W];
      phase.weight[k][i] = s[W] / across / inflation;
      wg += s[W] / radial;
      sg += s[G] / radial;
      xg += s[X] / radial;
      xxg += s[XX] / radial;
      xyg += s[XG] / radial;
      wp += s[W] / across;
      sp += s[F] / across;
      xp += s[X] / across;
      xxp += s[XX] / across;
      xyp += s[XF] / across;
    }
    gxx += xxg - (xg * xg) / wg;
    gxy += xyg - (xg * sg) / wg;
    pxx += xxp - (xp * xp) / wp;
    pxy += xyp - (xp * sp) / wp;
  }
  const smoothGain = fitRows(gain);
  const smoothPhase = fitRows(z.hasPhase ? phase : measurements());
  const steep = (xy: number, xx: number): number => {
    const slope = xy / xx;
    return xx > 0 && Math.abs(slope) > COLUMN_SIGMAS * Math.sqrt(inflation / xx) ? slope : 0;
  };
  const correction: RowCorrection = {
    logGain: withoutMean(smoothGain.offset),
    phaseRad: withoutMean(smoothPhase.offset),
    columnLogGain: before.columnLogGain + steep(gxy, gxx),
    columnPhaseRad: before.columnPhaseRad + (z.hasPhase ? steep(pxy, pxx) : 0),
  };
  return { correction, gain: smoothGain, phase: smoothPhase };
}

/** Places in the sums of one row and state: pixels; |e|² with e the signal expected; its products with the departures of gain and phase
 *  (Re and Im of z/e − 1), with the place x along the row, and with both. */
const [N, W, G, F, X, XX, XG, XF, SUMS] = [0, 1, 2, 3, 4, 5, 6, 7, 8] as const;

function sumRow(
  sums: readonly [Float64Array, Float64Array],
  i: number,
  z: Pixels,
  pure: PureCells,
  levels: Levels,
  parts: readonly [readonly [number, number], readonly [number, number]],
): void {
  const { cols } = z;
  const [a0, a1] = levels;
  sums[0].fill(0);
  sums[1].fill(0);
  const row = Math.floor(i / SIDE) * pure.cols;
  for (let first = 0, c = row; first < cols; first += SIDE, c++) {
    const k = pure.state[c];
    if (k > 1) continue;
    const u = pure.share[c];
    const er = a0.re + u * (a1.re - a0.re);
    const ei = a0.im + u * (a1.im - a0.im);
    const m2 = er * er + ei * ei;
    if (!(m2 > 0)) continue;
    const limit = CLIP2 * (parts[k][0] + parts[k][1]);
    let [n, g, f, nx, nxx, gx, fx] = [0, 0, 0, 0, 0, 0, 0];
    const last = Math.min(cols, first + SIDE);
    for (let j = first, p = i * cols + first; j < last; j++, p++) {
      const dr = z.re[p] - er;
      const di = z.im[p] - ei;
      if (z.usable[p] === 0 || dr * dr + di * di > limit) continue;
      const x = (j + 0.5) / cols - 0.5;
      const along = dr * er + di * ei;
      const turned = di * er - dr * ei;
      n++;
      g += along;
      f += turned;
      nx += x;
      nxx += x * x;
      gx += along * x;
      fx += turned * x;
    }
    const s = sums[k];
    s[N] += n;
    s[W] += n * m2;
    s[G] += g;
    s[F] += f;
    s[X] += m2 * nx;
    s[XX] += m2 * nxx;
    s[XG] += gx;
    s[XF] += fx;
  }
}

function withoutMean(offset: Float64Array): Float32Array {
  let mean = 0;
  for (const v of offset) mean += v / offset.length;
  return Float32Array.from(offset, (v) => v - mean);
}
