import { medianInPlace } from "../../numerics/quantile.js";
import { type Ring, ringOf } from "./ring.js";

const SD_PER_MEDIAN_ABS = 1.4826;
/** Two clusters of surroundings closer than this (difference of logarithms) are one state. */
const LEAST_STATE_STEP = 0.15;

/** One channel's departure of each pixel from its surroundings, in standard deviations of the pixel noise; NaN where nothing can be
 *  said: not measured, surroundings of both states, or a value that the frame's other state has as well. */
export type Departure = Float32Array;

interface Classes {
  /** Levels of the surroundings: one, or two where the frame shows both states. */
  readonly levels: readonly number[];
  /** Standard deviation of pixels about their surroundings, one a level. */
  readonly sds: readonly number[];
}

export interface Departures {
  readonly strict: Departure;
  readonly loose: Departure;
  /** Blocks with surroundings of one state. */
  readonly flat: Uint8Array;
  /** The same, but in a frame that shows both states the surroundings are so all round. */
  readonly calm: Uint8Array;
  /** One level, or two where the frame shows both states. */
  readonly levels: readonly number[];
  /** Pixel noise, the larger where there are two states. */
  readonly noise: number;
}

/** Departures of the logarithm of the amplitude, or of the phase, from surroundings of one state.
 *
 *  A small domain in the midst of the other state, or the foot of a wall, departs like debris. In frames that show both states a pixel
 *  between the two levels is therefore left out of `strict`: what departs that way counts only where the frame shows one state, or
 *  (`loose`) together with a bump in the topography.
 *  @param allowed 1 = surroundings known to be of one state from another channel; null = judge by this channel alone. Blocks. */
export function departures(
  values: Float32Array,
  ring: Ring,
  allowed: Uint8Array | null,
  rows: number,
  cols: number,
): Departures {
  const sd0 = pixelNoise(values, rows, cols);
  const tolerance = 0.8 * sd0 + 0.03;
  const blocks = ring.reference.length;
  const flat = new Uint8Array(blocks);
  for (let b = 0; b < blocks; b++) {
    if (ring.spread[b] <= tolerance && (allowed === null || allowed[b] === 1)) flat[b] = 1;
  }
  const classes = classify(values, ring, flat, rows, cols, sd0);
  const strict = new Float32Array(rows * cols).fill(Number.NaN);
  const loose = new Float32Array(rows * cols).fill(Number.NaN);
  const [first, second] = classes.levels;
  const calm = flat.slice();
  // walls reach to where their sectors already agree again, so in such frames all sectors must agree
  if (second !== undefined) for (let b = 0; b < blocks; b++) if (ring.widest[b] > tolerance) calm[b] = 0;
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const b = (i >> 1) * ring.blockCols + (j >> 1);
      if (flat[b] === 0) continue;
      const p = i * cols + j;
      const reference = ring.reference[b];
      const v = values[p];
      let own = 0;
      if (second !== undefined && Math.abs(reference - second) < Math.abs(reference - first)) own = 1;
      const z = (v - reference) / classes.sds[own];
      loose[p] = z;
      if (second !== undefined) {
        if (calm[b] === 0) continue;
        const other = own === 0 ? second : first;
        const towards = (v - reference) / (other - reference);
        const beyond = 1 + Math.max(0.25, (3 * classes.sds[1 - own]) / Math.abs(other - reference));
        if (towards > (2 * classes.sds[own]) / Math.abs(other - reference) && towards < beyond) continue;
      }
      strict[p] = z;
    }
  }
  const noise = Math.max(...classes.sds.filter(Number.isFinite), sd0);
  return { strict, loose, flat, calm, levels: classes.levels, noise };
}

function classify(
  values: Float32Array,
  ring: Ring,
  flat: Uint8Array,
  rows: number,
  cols: number,
  sd0: number,
): Classes {
  const references = new Float32Array(Math.ceil(flat.length / 3));
  let n = 0;
  for (let b = 0; b < flat.length; b += 3) if (flat[b] === 1) references[n++] = ring.reference[b];
  references.subarray(0, n).sort();
  const low = references[Math.floor(0.02 * n)];
  const high = references[Math.floor(0.98 * n)];
  let levels: number[] = [n > 0 ? references[n >> 1] : 0];
  if (n > 0 && high - low > LEAST_STATE_STEP + 2 * sd0) {
    const middle = 0.5 * (low + high);
    const split = references.subarray(0, n).findIndex((r) => r > middle);
    levels = [references[split >> 1], references[(split + n) >> 1]];
  }
  const samples = levels.map(() => new Float64Array(Math.ceil((rows * cols) / 3)));
  const counts = levels.map(() => 0);
  for (let p = 0; p < rows * cols; p += 3) {
    const i = Math.floor(p / cols);
    const b = (i >> 1) * ring.blockCols + ((p - i * cols) >> 1);
    if (flat[b] === 0 || Number.isNaN(values[p])) continue;
    const r = ring.reference[b];
    const own = levels.length === 2 && Math.abs(r - levels[1]) < Math.abs(r - levels[0]) ? 1 : 0;
    samples[own][counts[own]++] = Math.abs(values[p] - r);
  }
  const sds = samples.map((s, k) => {
    const sd = counts[k] >= 50 ? SD_PER_MEDIAN_ABS * medianInPlace(s, counts[k]) : sd0;
    return sd > 0 ? sd : Number.POSITIVE_INFINITY;
  });
  return { levels, sds };
}

/** Robust noise by second differences along the rows. */
function pixelNoise(values: Float32Array, rows: number, cols: number): number {
  const r = new Float64Array(Math.ceil((rows * cols) / 5));
  let n = 0;
  for (let p = 1; p < rows * cols - 1; p += 5) {
    const d = values[p - 1] - 2 * values[p] + values[p + 1];
    if (Number.isFinite(d)) r[n++] = Math.abs(d);
  }
  return n === 0 ? 0 : (SD_PER_MEDIAN_ABS / Math.sqrt(6)) * medianInPlace(r, n);
}

/** The film's height is the same all round, so a corner of the image, with three sectors, does for it. */
const LEAST_SECTORS_OF_HEIGHT = 3;

/** Heights over the surroundings, nm; NaN where not measured. */
export function heights(
  topography: Float32Array,
  rows: number,
  cols: number,
  radiusXPx: number,
  radiusYPx: number,
): Float32Array {
  const ring = ringOf(topography, rows, cols, radiusXPx, radiusYPx, LEAST_SECTORS_OF_HEIGHT);
  const out = new Float32Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      out[i * cols + j] = topography[i * cols + j] - ring.reference[(i >> 1) * ring.blockCols + (j >> 1)];
    }
  }
  return out;
}
