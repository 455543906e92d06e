import type { End, Ends } from "../../raster/ends.js";
import { SD_PER_MAD, medianInPlace, quantileInPlace } from "../../numerics/quantile.js";
import type { ColumnGroups } from "./column_groups.js";

const BINS = 10;
/** Residuals looked at: more would not make a median better by anything that matters. */
const MOST_RESIDUALS = 10_000;
const LEAST_IN_BIN = 40;

/** Standard deviation of a channel's pixel noise as a function of the signal's amplitude at the pixel. */
export interface NoiseByLevel {
  readonly low: number;
  readonly perLevel: number;
  /** One value a bin; `sdAt` picks one. */
  readonly sds: Float64Array;
  /** Over all pixels. */
  readonly sd: number;
  /** Whether its size is that of trace less retrace. */
  readonly byRetrace: boolean;
}

export const sdAt = (noise: NoiseByLevel, level: number): number => noise.sds[binOf(noise, level)];

function binOf({ low, perLevel }: NoiseByLevel, level: number): number {
  const b = (level - low) * perLevel;
  return b > 0 ? (b < BINS - 1 ? b | 0 : BINS - 1) : 0;
}

/** Variance of the noise of each group's mean, noise white from column to column.
 *  @param level the amplitude that the noise depends on, grouped alike; null where the noise is one number */
export function groupVariance(noise: NoiseByLevel, groups: ColumnGroups, level: ColumnGroups | null): Float32Array {
  const least = 1e-9 + 0.05 * noise.sd;
  const ofPixel = noise.sds.map((sd) => Math.max(sd, least) ** 2);
  const one = Math.max(noise.sd, least) ** 2;
  const out = new Float32Array(groups.values.length);
  for (let p = 0; p < out.length; p++) {
    const v = level === null ? one : ofPixel[binOf(noise, level.values[p])];
    out[p] = groups.counts[p] > 1 ? v / groups.counts[p] : v;
  }
  return out;
}

/** A difference of two angles in (−π, π], taken the short way round. */
export const shortWay = (rad: number): number =>
  rad > Math.PI ? rad - 2 * Math.PI : rad < -Math.PI ? rad + 2 * Math.PI : rad;

/** Noise from second differences along the rows, (v₋₁ − 2 v₀ + v₊₁)/√6, by 1.4826 · median |·|: blind to slopes, little
 *  moved by walls and relief, and to no row offset at all.
 *  @param level what the noise may depend on (the amplitude), same shape, or null: one value for all pixels
 *  @param kind  `angle`: differences are taken round the circle; `relative`: over the level, which is the noise of the logarithm as long as it is small
 *  Assumes noise that is white from column to column; noise that is correlated along the row comes out too small. */
export function measureNoise(
  values: Float32Array,
  level: Float32Array | null,
  rows: number,
  cols: number,
  kind: "plain" | "angle" | "relative" = "plain",
): NoiseByLevel {
  const stride = Math.max(1, Math.ceil((rows * cols) / MOST_RESIDUALS));
  const residuals = new Float64Array(Math.ceil((rows * cols) / stride));
  const levels = new Float64Array(residuals.length);
  let n = 0;
  for (let p = 0; p < rows * cols; p += stride) {
    const col = p % cols;
    if (col === 0 || col === cols - 1) continue;
    let left = values[p - 1] - values[p];
    let right = values[p + 1] - values[p];
    if (kind === "angle") {
      left = shortWay(left);
      right = shortWay(right);
    }
    const l = level === null ? 0 : (level[p - 1] + level[p] + level[p + 1]) / 3;
    let r = left + right;
    if (kind === "relative") r = l > 0 ? r / l : Number.NaN;
    if (Number.isNaN(r) || Number.isNaN(l)) continue;
    residuals[n] = Math.abs(r);
    levels[n++] = l;
  }
  const scale = SD_PER_MAD / Math.sqrt(6);
  const sd = n === 0 ? 0 : scale * medianInPlace(residuals.slice(0, n));
  const sds = new Float64Array(BINS).fill(sd);
  if (level === null || n < 4 * LEAST_IN_BIN) return { low: 0, perLevel: 0, sds, sd, byRetrace: false };
  const sorted = levels.slice(0, n);
  const low = quantileInPlace(sorted, 0.01);
  const high = quantileInPlace(sorted, 0.99);
  if (!(high > low)) return { low, perLevel: 0, sds, sd, byRetrace: false };
  const perLevel = BINS / (high - low);
  const inBin = new Float64Array(n);
  for (let bin = 0; bin < BINS; bin++) {
    const from = low + bin / perLevel;
    const to = low + (bin + 1) / perLevel;
    let m = 0;
    for (let k = 0; k < n; k++) if (levels[k] >= from && levels[k] < to) inBin[m++] = residuals[k];
    sds[bin] = m >= LEAST_IN_BIN ? scale * medianInPlace(inBin, m) : Number.NaN;
  }
  fillFromNeighbours(sds, sd);
  return { low, perLevel, sds, sd, byRetrace: false };
}

/** The same noise, its course over the levels kept, at the size that trace and retrace say: what they share cancels, so it is right
 *  where noise is correlated along the row and where the sample itself is rough from pixel to pixel.
 *  @param retraceSd standard deviation by trace less retrace; undefined or 0: as it was
 *  @param ownSd     what differences along the row say of the same values, all levels together */
export function scaledBy(noise: NoiseByLevel, retraceSd: number | undefined, ownSd: number): NoiseByLevel {
  if (retraceSd === undefined || !(retraceSd > 0)) return noise;
  // Nothing to scale in values so coarse that most neighbours are alike.
  if (!(ownSd > 0 && noise.sd > 0)) return noise;
  const factor = retraceSd / ownSd;
  return { ...noise, byRetrace: true, sd: factor * noise.sd, sds: noise.sds.map((v) => factor * v) };
}

/** A bin with too few pixels takes the nearest bin's value. */
function fillFromNeighbours(sds: Float64Array, fallback: number): void {
  const known = sds.slice();
  for (let b = 0; b < sds.length; b++) {
    for (let d = 0; Number.isNaN(sds[b]) && d < sds.length; d++) {
      const below = known[b - d];
      const above = known[b + d];
      if (below > 0) sds[b] = below;
      else if (above > 0) sds[b] = above;
    }
    if (!(sds[b] > 0)) sds[b] = fallback;
  }
}

/** Share of the measured pixels that sit at the very top or bottom value, where those are piled up as a clipped detector
 *  piles them: many at the extreme, few at the next value inward. 0 where nothing is piled up. */
export function clippedShare({ low, high, measured }: Ends): number {
  if (!(high.value > low.value)) return 0;
  const piled = (end: End): number => (end.count >= 10 && end.count > 5 * end.nextCount ? end.count : 0);
  return (piled(high) + piled(low)) / measured;
}
