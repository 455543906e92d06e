import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import type { Pixels, RowCorrection } from "./pixels.js";
import type { PurePixels } from "./pure.js";
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
  pure: PurePixels,
  levels: readonly [ComplexValue, ComplexValue],
  noise: readonly [NoiseCovariance, NoiseCovariance],
  before: RowCorrection,
  inflation: number,
): RowRefinement {
  const { rows, cols } = z;
  const [a0, a1] = levels;
  const parts = [radialAndAcross(a0, noise[0]), radialAndAcross(a1, noise[1])] as const;
  const measurements = (): RowMeasurements => ({
    value: [new Float64Array(rows), new Float64Array(rows)],
    weight: [new Float64Array(rows), new Float64Array(rows)],
  });
  const gain = measurements();
  const phase = measurements();
  // moments along the columns, for a gradient: Σ w x², Σ w x y with the row's mean taken out
  let [gxx, gxy, pxx, pxy] = [0, 0, 0, 0];
  for (let i = 0; i < rows; i++) {
    const n = [0, 0];
    let [wg, wp, sg, sp, xg, xp, xxg, xxp, xyg, xyp] = [0, 0, 0, 0, 0, 0, 0, 0, 0, 0];
    const own = [0, 0, 0, 0, 0, 0, 0, 0];
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      const k = pure.state[p];
      if (k > 1) continue;
      const u = pure.share[p];
      const er = u === 0 ? a0.re : u === 1 ? a1.re : (1 - u) * a0.re + u * a1.re;
      const ei = u === 0 ? a0.im : u === 1 ? a1.im : (1 - u) * a0.im + u * a1.im;
      const m2 = er * er + ei * ei;
      if (!(m2 > 0)) continue;
      const dr = z.re[p] - er;
      const di = z.im[p] - ei;
      const [radial, across] = k === 0 ? parts[0] : parts[1];
      if (dr * dr + di * di > CLIP2 * (radial + across)) continue;
      const x = (j + 0.5) / cols - 0.5;
      const g = (dr * er + di * ei) / m2;
      const f = (di * er - dr * ei) / m2;
      const wGain = m2 / radial;
      const wPhase = m2 / across;
      n[k]++;
      own[k] += wGain;
      own[2 + k] += wGain * g;
      own[4 + k] += wPhase;
      own[6 + k] += wPhase * f;
      wg += wGain;
      wp += wPhase;
      sg += wGain * g;
      sp += wPhase * f;
      xg += wGain * x;
      xp += wPhase * x;
      xxg += wGain * x * x;
      xxp += wPhase * x * x;
      xyg += wGain * x * g;
      xyp += wPhase * x * f;
    }
    if (n[0] + n[1] < LEAST_IN_ROW) continue;
    for (const k of [0, 1] as const) {
      if (n[k] === 0) continue;
      gain.value[k][i] = before.logGain[i] + Math.log1p(Math.max(-0.9, own[2 + k] / own[k]));
      gain.weight[k][i] = own[k] / inflation;
      phase.value[k][i] = before.phaseRad[i] + own[6 + k] / own[4 + k];
      phase.weight[k][i] = own[4 + k] / inflation;
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

function withoutMean(offset: Float64Array): Float32Array {
  let mean = 0;
  for (const v of offset) mean += v / offset.length;
  return Float32Array.from(offset, (v) => v - mean);
}
