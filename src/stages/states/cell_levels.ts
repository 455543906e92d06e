import type { ComplexValue } from "../../model/signal.js";
import type { Cells } from "./cells.js";
import type { PureCells } from "./pure.js";

export type Levels = readonly [ComplexValue, ComplexValue];

/** Cells further than this many standard deviations from what is expected there are left out the second time (debris that was missed,
 *  scars). */
const CLIP2 = 16;

/** Sums of the normal equations of z = (1 − u) z_0 + u z_1. */
interface LevelSums {
  readonly aa: number;
  readonly ab: number;
  readonly bb: number;
  readonly ar: number;
  readonly ai: number;
  readonly br: number;
  readonly bi: number;
}

/** Both levels; that of the other one for a state without pixels. */
function solveLevels({ aa, ab, bb, ar, ai, br, bi }: LevelSums): Levels {
  const det = aa * bb - ab * ab;
  if (!(det > 1e-9 * aa * bb) || aa === 0 || bb === 0) {
    const one = aa > 0 ? { re: ar / aa, im: ai / aa } : null;
    const other = bb > 0 ? { re: br / bb, im: bi / bb } : null;
    return [one ?? other ?? NOTHING, other ?? one ?? NOTHING];
  }
  return [
    { re: (bb * ar - ab * br) / det, im: (bb * ai - ab * bi) / det },
    { re: (aa * br - ab * ar) / det, im: (aa * bi - ab * ai) / det },
  ];
}

/** Both levels from the pure cells, by least squares with the expected share of each cell, twice: what lies far off the first answer is
 *  left out of the second.
 *  @returns `variance` mean square of the departure of a state's cells, Re² + Im² */
export function levelsOfCells(
  cells: Cells,
  pure: PureCells,
): { readonly levels: Levels; readonly variance: readonly [number, number] } {
  const first = solveLevels(sumsOf(cells, pure, null, [0, 0]));
  const variance = varianceOf(cells, pure, first);
  const limits = [CLIP2 * variance[0], CLIP2 * variance[1]] as const;
  return { levels: solveLevels(sumsOf(cells, pure, first, limits)), variance };
}

/** Sums over the pure cells, those within their state's limit (squared) of `before` where that is given. */
function sumsOf(cells: Cells, pure: PureCells, before: Levels | null, limits: readonly [number, number]): LevelSums {
  const { re, im, count } = cells;
  const { state, share } = pure;
  const [a0, a1] = before ?? [NOTHING, NOTHING];
  const [a0Re, a0Im, dRe, dIm] = [a0.re, a0.im, a1.re - a0.re, a1.im - a0.im];
  const [limit0, limit1] = before === null ? [Infinity, Infinity] : limits;
  let [aa, ab, bb, ar, ai, br, bi] = [0, 0, 0, 0, 0, 0, 0];
  for (let c = 0; c < state.length; c++) {
    const k = state[c];
    if (k > 1) continue;
    const u = share[c];
    const v = 1 - u;
    const n = count[c];
    // n times the departure of the mean
    const dr = re[c] - n * (a0Re + u * dRe);
    const di = im[c] - n * (a0Im + u * dIm);
    if (dr * dr + di * di > n * n * (k === 0 ? limit0 : limit1)) continue;
    aa += n * v * v;
    ab += n * u * v;
    bb += n * u * u;
    ar += v * re[c];
    ai += v * im[c];
    br += u * re[c];
    bi += u * im[c];
  }
  return { aa, ab, bb, ar, ai, br, bi };
}

const NOTHING: ComplexValue = { re: 0, im: 0 };

function varianceOf(cells: Cells, pure: PureCells, [a0, a1]: Levels): [number, number] {
  const { re, im, count } = cells;
  const { state, share } = pure;
  const [a0Re, a0Im, dRe, dIm] = [a0.re, a0.im, a1.re - a0.re, a1.im - a0.im];
  let [sum0, sum1] = [0, 0];
  for (let c = 0; c < state.length; c++) {
    const k = state[c];
    if (k > 1) continue;
    const u = share[c];
    const n = count[c];
    const dr = re[c] - n * (a0Re + u * dRe);
    const di = im[c] - n * (a0Im + u * dIm);
    const d2 = (dr * dr + di * di) / n;
    if (k === 0) sum0 += d2;
    else sum1 += d2;
  }
  return [sum0 / Math.max(1, pure.count[0]), sum1 / Math.max(1, pure.count[1])];
}
