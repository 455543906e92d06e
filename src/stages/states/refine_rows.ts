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
      if (!(s[W] > 0)) continue;
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

/** Sums of row i over the pure cells; a pixel's place is that of its cell. */
function sumRow(
  sums: readonly [Float64Array, Float64Array],
  i: number,
  z: Pixels,
  pure: PureCells,
  levels: Levels,
  parts: readonly [readonly [number, number], readonly [number, number]],
): void {
  sums[0].fill(0);
  sums[1].fill(0);
  const row = Math.floor(i / SIDE) * pure.cols;
  const end = row + pure.cols;
  for (let c = row; c < end;) {
    const k = pure.state[c];
    const start = c;
    do c++;
    while (c < end && pure.state[c] === k);
    if (k <= 1) sumRun(sums[k], i, start - row, c - row, z, pure, levels, CLIP2 * (parts[k][0] + parts[k][1]));
  }
}

/** Adds the pixels of row i in the cells of one state from column `first` to the one before `end`. */
function sumRun(
  sums: Float64Array,
  i: number,
  first: number,
  end: number,
  z: Pixels,
  pure: PureCells,
  [a0, a1]: Levels,
  limit: number,
): void {
  const { cols } = z;
  const { re, im, usable } = z;
  const { share } = pure;
  const [a0Re, a0Im, dRe, dIm] = [a0.re, a0.im, a1.re - a0.re, a1.im - a0.im];
  const row = Math.floor(i / SIDE) * pure.cols;
  let [n, w, g, f, x1, x2, xg, xf] = [0, 0, 0, 0, 0, 0, 0, 0];
  for (let c = first; c < end; c++) {
    const u = share[row + c];
    const er = a0Re + u * dRe;
    const ei = a0Im + u * dIm;
    const last = Math.min(cols, SIDE * (c + 1));
    let [inCell, along, turned] = [0, 0, 0];
    for (let j = SIDE * c, p = i * cols + j; j < last; j++, p++) {
      const dr = re[p] - er;
      const di = im[p] - ei;
      if (usable[p] === 0 || dr * dr + di * di > limit) continue;
      inCell++;
      along += dr * er + di * ei;
      turned += di * er - dr * ei;
    }
    const x = (SIDE * (c + 0.5)) / cols - 0.5;
    const m2 = inCell * (er * er + ei * ei);
    n += inCell;
    w += m2;
    g += along;
    f += turned;
    x1 += m2 * x;
    x2 += m2 * x * x;
    xg += along * x;
    xf += turned * x;
  }
  sums[N] += n;
  sums[W] += w;
  sums[G] += g;
  sums[F] += f;
  sums[X] += x1;
  sums[XX] += x2;
  sums[XG] += xg;
  sums[XF] += xf;
}

function withoutMean(offset: Float64Array): Float32Array {
  let mean = 0;
  for (const v of offset) mean += v / offset.length;
  return Float32Array.from(offset, (v) => v - mean);
}
