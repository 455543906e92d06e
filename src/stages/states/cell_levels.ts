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
  const sums = noSums();
  addCells(sums, cells, pure, 0, null, 0);
  addCells(sums, cells, pure, 1, null, 0);
  const first = solveLevels(sums);
  const variance: [number, number] = [variance2(cells, pure, 0, first), variance2(cells, pure, 1, first)];
  const clipped = noSums();
  addCells(clipped, cells, pure, 0, first, CLIP2 * variance[0]);
  addCells(clipped, cells, pure, 1, first, CLIP2 * variance[1]);
  return { levels: solveLevels(clipped), variance };
}

/** Adds the pure cells of one state, those within the root of `clip2` of `before` where that is given. */
function addCells(
  sums: LevelSums,
  cells: Cells,
  pure: PureCells,
  which: 0 | 1,
  before: Levels | null,
  clip2: number,
): void {
  const { re, im, count } = cells;
  let [aa, ab, bb, ar, ai, br, bi] = [0, 0, 0, 0, 0, 0, 0];
  for (let c = 0; c < re.length; c++) {
    if (pure.state[c] !== which) continue;
    const u = pure.share[c];
    const v = 1 - u;
    const n = count[c];
    if (before !== null && distance2(re[c] / n, im[c] / n, u, before) > clip2) continue;
    aa += n * v * v;
    ab += n * u * v;
    bb += n * u * u;
    ar += v * re[c];
    ai += v * im[c];
    br += u * re[c];
    bi += u * im[c];
  }
  sums.aa += aa;
  sums.ab += ab;
  sums.bb += bb;
  sums.ar += ar;
  sums.ai += ai;
  sums.br += br;
  sums.bi += bi;
}

function variance2(cells: Cells, pure: PureCells, which: 0 | 1, levels: Levels): number {
  const { re, im, count } = cells;
  let sum = 0;
  let total = 0;
  for (let c = 0; c < re.length; c++) {
    if (pure.state[c] !== which) continue;
    const n = count[c];
    total += n;
    sum += n * distance2(re[c] / n, im[c] / n, pure.share[c], levels);
  }
  return total > 0 ? sum / total : 0;
}

function distance2(re: number, im: number, u: number, [a, b]: Levels): number {
  const dr = re - a.re - u * (b.re - a.re);
  const di = im - a.im - u * (b.im - a.im);
  return dr * dr + di * di;
}
