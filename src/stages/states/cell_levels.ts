import type { ComplexValue } from "../../model/signal.js";
import type { Cells } from "./cells.js";
import type { PureCells } from "./pure.js";

export type Levels = readonly [ComplexValue, ComplexValue];

/** Cells further than this many standard deviations from what is expected there are left out the second time (debris that was missed,
 *  scars). */
const CLIP2 = 16;

/** Sums of the normal equations of z = (1 − u) z_0 + u z_1. */
export interface LevelSums {
  aa: number;
  ab: number;
  bb: number;
  ar: number;
  ai: number;
  br: number;
  bi: number;
}

export const noSums = (): LevelSums => ({ aa: 0, ab: 0, bb: 0, ar: 0, ai: 0, br: 0, bi: 0 });

/** Both levels; NaN where a state has no pixels. */
export function solveLevels({ aa, ab, bb, ar, ai, br, bi }: LevelSums): Levels {
  const det = aa * bb - ab * ab;
  if (!(det > 1e-9 * aa * bb) || aa === 0 || bb === 0) {
    const one: ComplexValue = { re: aa > 0 ? ar / aa : Number.NaN, im: aa > 0 ? ai / aa : Number.NaN };
    const other: ComplexValue = { re: bb > 0 ? br / bb : Number.NaN, im: bb > 0 ? bi / bb : Number.NaN };
    return [one, other];
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
  let [aa, ab, bb, ar, ai, br, bi] = [0, 0, 0, 0, 0, 0, 0];
  for (let c = 0; c < state.length; c++) {
    const k = state[c];
    if (k > 1) continue;
    const u = share[c];
    const v = 1 - u;
    const n = count[c];
    if (before !== null && distance2(re[c] / n, im[c] / n, u, before) > limits[k]) continue;
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

function varianceOf(cells: Cells, pure: PureCells, levels: Levels): [number, number] {
  const { re, im, count } = cells;
  let [sum0, sum1] = [0, 0];
  for (let c = 0; c < re.length; c++) {
    const k = pure.state[c];
    if (k > 1) continue;
    const n = count[c];
    const d2 = n * distance2(re[c] / n, im[c] / n, pure.share[c], levels);
    if (k === 0) sum0 += d2;
    else sum1 += d2;
  }
  return [sum0 / Math.max(1, pure.count[0]), sum1 / Math.max(1, pure.count[1])];
}

function distance2(re: number, im: number, u: number, levels: Levels): number {
  const [a, b] = levels;
  const dr = re - a.re - u * (b.re - a.re);
  const di = im - a.im - u * (b.im - a.im);
  return dr * dr + di * di;
}
