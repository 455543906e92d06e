import { median } from "../../numerics/quantile.js";
import { sinCos } from "../../numerics/sin_cos.js";
import type { Contrast } from "./chord.js";
import type { EffectSums, Grid } from "./grid.js";
import type { Ring } from "./ring.js";

/** Amplitude over that of the surroundings beyond which a pixel counts as this much only. */
const MOST_RATIO = 5;
/** So many frames without any domain are enough to leave aside the frames with domains. */
const ENOUGH_FRAMES = 4;
/** A departure of its own standard deviations that is not noise. */
const SIGNIFICANT = 3;
/** In fewer frames, or where noise hides a core's departure, a bump is taken for debris that takes the state away. */
const LEAST_FRAMES = 2;
/** Mark of a place where debris is known, but not what it does to the signal. */
const KNOWN = 2;

export function emptyEffect(n: number): EffectSums {
  return {
    re: new Float32Array(n),
    im: new Float32Array(n),
    weight: new Float32Array(n),
    squares: new Float32Array(n),
  };
}

/** One frame's ratios z/z_surroundings − 1, row-major [rows, cols]; 0 where `known` is 0. */
export interface Ratios {
  readonly re: Float32Array;
  readonly im: Float32Array;
  readonly known: Uint8Array;
}

/** Adds one frame's ratios (complex; real where there is no phase), each shared out among the four grid
 *  pixels about its exact place, so that the mean over frames lies where the particle does, to far better than a pixel.
 *  @param atCol, atRow where the frame's first pixel lies on the grid, in grid pixels, not whole */
export function addEffect(
  sums: EffectSums,
  { re, im, known }: Ratios,
  rows: number,
  cols: number,
  gridRows: number,
  gridCols: number,
  atRow: number,
  atCol: number,
): void {
  const row0 = Math.floor(atRow);
  const col0 = Math.floor(atCol);
  const fy = atRow - row0;
  const fx = atCol - col0;
  // a grid pixel gets its shares of the frame's pixels at (i, j), (i, j − 1), (i − 1, j) and (i − 1, j − 1)
  const shares = [(1 - fy) * (1 - fx), (1 - fy) * fx, fy * (1 - fx), fy * fx].map((w) => (w < 1e-6 ? 0 : w));
  const [here, left, up, both] = shares;
  const whole = shares.reduce((t, w) => t + w, 0);
  const wholeSquares = shares.reduce((t, w) => t + w * w, 0);
  for (let i = Math.max(0, -row0); i <= Math.min(rows, gridRows - 1 - row0); i++) {
    for (let j = Math.max(0, -col0); j <= Math.min(cols, gridCols - 1 - col0); j++) {
      const p = i * cols + j;
      const a = i < rows && j < cols ? known[p] : 0;
      const b = i < rows && j > 0 ? known[p - 1] : 0;
      const c = i > 0 && j < cols ? known[p - cols] : 0;
      const d = i > 0 && j > 0 ? known[p - cols - 1] : 0;
      if ((a | b | c | d) === 0) continue;
      const g = (i + row0) * gridCols + j + col0;
      if ((a & b & c & d) === 1) {
        sums.re[g] += here * re[p] + left * re[p - 1] + up * re[p - cols] + both * re[p - cols - 1];
        sums.im[g] += here * im[p] + left * im[p - 1] + up * im[p - cols] + both * im[p - cols - 1];
        sums.weight[g] += whole;
        sums.squares[g] += wholeSquares;
        continue;
      }
      for (let k = 0; k < 4; k++) {
        if ((k === 0 ? a : k === 1 ? b : k === 2 ? c : d) === 0) continue;
        const q = p - (k & 1) - (k >> 1) * cols;
        const w = shares[k];
        sums.re[g] += w * re[q];
        sums.im[g] += w * im[q];
        sums.weight[g] += w;
        sums.squares[g] += w * w;
      }
    }
  }
}

/** Ratios less 1 of the pixels whose surroundings are of one state all round.
 *  @param phase null where there is none
 *  @param logRing, phaseRing surroundings of the logarithm of the amplitude and of the phase
 *  @param calm 1 = of one state; in blocks of the rings */
export function ratiosOf(
  amplitude: Float32Array,
  logRing: Ring,
  phase: Float32Array | null,
  phaseRing: Ring | null,
  calm: Uint8Array,
  rows: number,
  cols: number,
): Ratios {
  const { shift, blockCols } = logRing;
  const re = new Float32Array(rows * cols);
  const im = new Float32Array(rows * cols);
  const known = new Uint8Array(rows * cols);
  const perLevel = logRing.reference.map((r) => Math.exp(-r));
  const turned = new Float64Array(2);
  for (let i = 0, p = 0; i < rows; i++) {
    const row = (i >> shift) * blockCols;
    for (let j = 0; j < cols; j++, p++) {
      const b = row + (j >> shift);
      if (calm[b] === 0) continue;
      const ratio = amplitude[p] * perLevel[b];
      if (!(ratio > 0)) continue;
      const size = ratio < MOST_RATIO ? ratio : MOST_RATIO;
      if (phase === null || phaseRing === null) re[p] = size - 1;
      else {
        const turn = phase[p] - phaseRing.reference[b];
        if (Number.isNaN(turn)) continue;
        sinCos(turn, turned);
        re[p] = size * turned[1] - 1;
        im[p] = size * turned[0];
      }
      known[p] = 1;
    }
  }
  return { re, im, known };
}

/** Step between the two states over the larger of their amplitudes; 1 where no frame showed both. */
export function contrastOverLevel(contrasts: readonly Contrast[]): number {
  if (contrasts.length === 0) return 1;
  const ratio = Math.exp(median(contrasts.map((c) => c.logRatio)));
  const turn = median(contrasts.map((c) => c.turnRad));
  return Math.hypot(ratio * Math.cos(turn) - 1, ratio * Math.sin(turn)) / Math.max(1, ratio);
}

/** What debris does to the signal, as a multiple of what takes a pixel's state away: `coreShare` of the step between the states, or of
 *  the level where no frame showed both. The departure is that of the mean over all frames which show one state only, or, where there
 *  are too few of them, over all in which the surroundings are of one state all round. It multiplies the signal, so the
 *  brighter state departs by more; the figure is for that one.
 *  @param spots 1 = debris, `bumps` 1 = debris known by its height, row-major on the grid
 *  @param within 1 = look here; 0 elsewhere in the result
 *  @returns row-major on the grid; at least 1 in the core */
export function coreStrength(
  grid: Grid,
  spots: Uint8Array,
  bumps: Uint8Array,
  within: Uint8Array,
  coreShare: number,
): Float32Array {
  const { lone, mixed } = grid.effect;
  const out = new Float32Array(spots.length);
  const least = coreShare * contrastOverLevel(grid.pair.contrasts);
  for (let p = 0; p < out.length; p++) {
    if (within[p] === 0) continue;
    const alone = lone.weight[p] >= ENOUGH_FRAMES;
    const frames = lone.weight[p] + (alone ? 0 : mixed.weight[p]);
    let measured = frames >= LEAST_FRAMES;
    if (frames > 0) {
      const re = (lone.re[p] + (alone ? 0 : mixed.re[p])) / frames;
      const im = (lone.im[p] + (alone ? 0 : mixed.im[p])) / frames;
      const squares = lone.squares[p] + (alone ? 0 : mixed.squares[p]);
      const sd = (grid.pair.noise * Math.sqrt(squares)) / frames;
      const size = Math.hypot(re, im);
      out[p] = size >= SIGNIFICANT * sd ? size / least : Math.min(size / least, 0.99);
      if (SIGNIFICANT * sd > least) measured = false;
    }
    if (!measured && (bumps[p] === 1 || (frames === 0 && spots[p] === 1))) out[p] = Math.max(out[p], KNOWN);
  }
  return out;
}
