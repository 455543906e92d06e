import { medianInPlace } from "../../numerics/quantile.js";
import { type Ring, ringOf } from "./ring.js";

const SD_PER_MEDIAN_ABS = 1.4826;
/** Two clusters of surroundings closer than this (difference of logarithms) are one state. */
const LEAST_STATE_STEP = 0.15;

interface Classes {
  /** Levels of the surroundings: one, or two where the frame shows both states. */
  readonly levels: readonly number[];
  /** Standard deviation of pixels about their surroundings, one a level. */
  readonly sds: readonly number[];
}

/** What departures of one channel are measured by; per block of `ring`.
 *
 *  A pixel's departure z is its value less the block's `reference`, times `perSd`: in standard deviations of the pixel noise. It says something
 *  where the block is flat. A small domain in the midst of the other state, or the foot of a wall, departs like debris. In frames that show both
 *  states a departure between the two levels, FOOT < z·towards < `beyond`, or in surroundings that are not of one state all round, is
 *  therefore `loose` evidence only: it counts together with a bump in the topography. All others are strict. */
export interface Judged {
  readonly ring: Ring;
  /** 1 = surroundings of one state. */
  readonly flat: Uint8Array;
  /** The same, but in a frame that shows both states the surroundings are so all round. */
  readonly calm: Uint8Array;
  readonly perSd: Float32Array;
  /** 1 or −1: which way the other state lies; 0 where there is none. */
  readonly towards: Int8Array;
  readonly beyond: Float32Array;
  /** One level, or two where the frame shows both states. */
  readonly levels: readonly number[];
  /** Pixel noise, the larger where there are two states. */
  readonly noise: number;
}

/** Departures towards the other state by less than so many standard deviations are noise. */
export const FOOT = 2;

/** Judges the surroundings of the logarithm of the amplitude, or of the phase.
 *  @param allowed 1 = surroundings known to be of one state from another channel; null = judge by this channel alone. Blocks. */
export function judge(
  values: Float32Array,
  ring: Ring,
  allowed: Uint8Array | null,
  rows: number,
  cols: number,
): Judged {
  const sd0 = pixelNoise(values, rows, cols);
  const tolerance = 0.8 * sd0 + 0.03;
  const blocks = ring.reference.length;
  const flat = new Uint8Array(blocks);
  for (let b = 0; b < blocks; b++) {
    if (ring.spread[b] <= tolerance && (allowed === null || allowed[b] === 1)) flat[b] = 1;
  }
  const { levels, sds } = classify(values, ring, flat, rows, cols, sd0);
  const [first, second] = levels;
  const calm = flat.slice();
  const perSd = new Float32Array(blocks).fill(1 / sds[0]);
  const towards = new Int8Array(blocks);
  const beyond = new Float32Array(blocks);
  if (second !== undefined) {
    for (let b = 0; b < blocks; b++) {
      // walls reach to where their sectors already agree again, so in such frames all sectors must agree
      if (ring.widest[b] > tolerance) calm[b] = 0;
      const reference = ring.reference[b];
      const own = Math.abs(reference - second) < Math.abs(reference - first) ? 1 : 0;
      const step = (own === 0 ? second : first) - reference;
      perSd[b] = 1 / sds[own];
      towards[b] = Math.sign(step);
      beyond[b] = (Math.abs(step) + Math.max(0.25 * Math.abs(step), 3 * sds[1 - own])) / sds[own];
    }
  }
  return { ring, flat, calm, perSd, towards, beyond, levels, noise: Math.max(...sds.filter(Number.isFinite), sd0) };
}

/** Values looked at for a median: more would not make it better by anything that matters. */
const MOST_VALUES = 12_000;

function classify(
  values: Float32Array,
  ring: Ring,
  flat: Uint8Array,
  rows: number,
  cols: number,
  sd0: number,
): Classes {
  const references = new Float32Array(flat.length);
  let n = 0;
  for (let b = 0; b < flat.length; b++) if (flat[b] === 1) references[n++] = ring.reference[b];
  references.subarray(0, n).sort();
  const low = references[Math.floor(0.02 * n)];
  const high = references[Math.floor(0.98 * n)];
  let levels: number[] = [n > 0 ? references[n >> 1] : 0];
  if (n > 0 && high - low > LEAST_STATE_STEP + 2 * sd0) {
    const middle = 0.5 * (low + high);
    const split = references.subarray(0, n).findIndex((r) => r > middle);
    levels = [references[split >> 1], references[(split + n) >> 1]];
  }
  const stride = strideOf(rows * cols);
  const samples = levels.map(() => new Float64Array(Math.ceil((rows * cols) / stride)));
  const counts = levels.map(() => 0);
  for (let p = 0; p < rows * cols; p += stride) {
    const i = Math.floor(p / cols);
    const b = (i >> ring.shift) * ring.blockCols + ((p - i * cols) >> ring.shift);
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
  const stride = strideOf(rows * cols);
  const r = new Float64Array(Math.ceil((rows * cols) / stride));
  let n = 0;
  for (let p = 1; p < rows * cols - 1; p += stride) {
    const d = values[p - 1] - 2 * values[p] + values[p + 1];
    if (Number.isFinite(d)) r[n++] = Math.abs(d);
  }
  return n === 0 ? 0 : (SD_PER_MEDIAN_ABS / Math.sqrt(6)) * medianInPlace(r, n);
}

/** Odd, so that the columns of a frame, mostly an even number, take turns. */
const strideOf = (pixels: number): number => Math.ceil(pixels / MOST_VALUES) | 1;

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
  for (let i = 0, p = 0; i < rows; i++) {
    const row = (i >> ring.shift) * ring.blockCols;
    for (let j = 0; j < cols; j++, p++) out[p] = topography[p] - ring.reference[row + (j >> ring.shift)];
  }
  return out;
}
