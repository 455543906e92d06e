import { median } from "../../numerics/quantile.js";
import type { Contrast } from "./chord.js";
import type { EffectSums, Grid } from "./grid.js";

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

/** Adds one frame's ratios z/z_surroundings − 1 (complex; real where there is no phase), each shared out among the four grid
 *  pixels about its exact place, so that the mean over frames lies where the particle does, to far better than a pixel.
 *  @param ratioRe, ratioIm row-major [rows, cols], NaN = nothing to say; `ratioIm` null where there is no phase
 *  @param atCol, atRow where the frame's first pixel lies on the grid, in grid pixels, not whole */
export function addEffect(
  sums: EffectSums,
  ratioRe: Float32Array,
  ratioIm: Float32Array | null,
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
  for (let corner = 0; corner < 4; corner++) {
    const dr = corner >> 1;
    const dc = corner & 1;
    const w = (dr === 0 ? 1 - fy : fy) * (dc === 0 ? 1 - fx : fx);
    if (w < 1e-6) continue;
    const top = row0 + dr;
    const left = col0 + dc;
    const from = Math.max(0, -left);
    const to = Math.min(cols, gridCols - left);
    for (let i = Math.max(0, -top); i < Math.min(rows, gridRows - top); i++) {
      for (let j = from; j < to; j++) {
        const re = ratioRe[i * cols + j];
        if (Number.isNaN(re)) continue;
        const g = (i + top) * gridCols + j + left;
        sums.re[g] += w * re;
        if (ratioIm !== null) sums.im[g] += w * ratioIm[i * cols + j];
        sums.weight[g] += w;
        sums.squares[g] += w * w;
      }
    }
  }
}

/** Ratios less 1 of the pixels whose surroundings are of one state all round.
 *  @param log logarithm of the amplitude, `phase` null where there is none
 *  @param logReference, phaseReference of the surroundings; `calm` 1 = of one state; all three in blocks of 2 × 2 pixels */
export function ratiosOf(
  log: Float32Array,
  logReference: Float32Array,
  phase: Float32Array | null,
  phaseReference: Float32Array | null,
  calm: Uint8Array,
  rows: number,
  cols: number,
  blockCols: number,
): { readonly re: Float32Array; readonly im: Float32Array | null } {
  const n = rows * cols;
  const re = new Float32Array(n).fill(Number.NaN);
  const im = phase === null ? null : new Float32Array(n);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const b = (i >> 1) * blockCols + (j >> 1);
      if (calm[b] === 0) continue;
      const p = i * cols + j;
      const size = Math.min(MOST_RATIO, Math.exp(log[p] - logReference[b]));
      if (phase === null || phaseReference === null || im === null) {
        re[p] = size - 1;
        continue;
      }
      const turn = phase[p] - phaseReference[b];
      re[p] = size * Math.cos(turn) - 1;
      im[p] = size * Math.sin(turn);
    }
  }
  return { re, im };
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
