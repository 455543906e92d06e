import { PROFILE_COLUMNS } from "../../model/pictures.js";
import { fastKink } from "../../numerics/kink.js";
import type { CorrelatedNoise } from "./correlation.js";
import type { ProfileEstimate } from "./estimate.js";
import type { ProfileData } from "./profile_data.js";

/** At most this many bins a profile. */
const MOST_BINS = 36;

/** The pixels of a fitted profile in bins of distance from the fitted line, on the scale of its two levels, for drawing: per bin the mean
 *  distance, the fitted curve there plus the mean residual, and its sd with the noise's correlation in it. Pixels weigh as in the fit.
 *  @param leastNm bins are no narrower, nm */
export function drawnProfile(
  data: ProfileData,
  e: ProfileEstimate,
  noise: CorrelatedNoise,
  leastNm: number,
): Float32Array {
  const { wNm, sigmaNm } = e.shape;
  const n = data.count;
  const at = new Float64Array(n);
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (let k = 0; k < n; k++) {
    at[k] = data.distance[k] - e.centreNm - e.tilt * data.arc[k];
    low = Math.min(low, at[k]);
    high = Math.max(high, at[k]);
  }
  // nothing left in reach, or a fit that has run away: there is nothing to draw
  if (!Number.isFinite(high - low)) return new Float32Array(0);
  const binNm = Math.max(leastNm, (high - low) / (MOST_BINS - 1), 1e-6);
  const first = Math.floor(low / binNm);
  const many = Math.floor(high / binNm) - first + 1;
  const bin = new Int16Array(n);
  /** 1/sd of a pixel's share. */
  const precision = new Float64Array(n);
  const weight = new Float64Array(many);
  const distance = new Float64Array(many);
  const residual = new Float64Array(many);
  const u = new Float64Array(4);
  for (let k = 0; k < n; k++) {
    fastKink(at[k], wNm, sigmaNm, u);
    const contrast = e.metallic * data.beta[k] - e.insulating * data.alpha[k];
    const model = e.insulating * data.alpha[k] * (1 - u[0]) + e.metallic * data.beta[k] * u[0];
    const b = Math.floor(at[k] / binNm) - first;
    bin[k] = b;
    precision[k] = Math.abs(contrast) * data.weight[k];
    const w = precision[k] * precision[k];
    if (!(w > 0)) continue;
    weight[b] += w;
    distance[b] += w * at[k];
    residual[b] += (w * (data.value[k] - model)) / contrast;
  }
  const information = noise.summedByBin(data, bin, precision, many);
  const out = new Float32Array(many * PROFILE_COLUMNS);
  let filled = 0;
  for (let b = 0; b < many; b++) {
    if (!(weight[b] > 0)) continue;
    const mean = distance[b] / weight[b];
    fastKink(mean, wNm, sigmaNm, u);
    out.set([mean, u[0] + residual[b] / weight[b], Math.sqrt(information[b]) / weight[b]], filled * PROFILE_COLUMNS);
    filled++;
  }
  return out.slice(0, filled * PROFILE_COLUMNS);
}
