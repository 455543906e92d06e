import type { NoiseCovariance } from "../../model/signal.js";
import { SIDE } from "./cells.js";
import { noSums, solveLevels, type Levels } from "./cell_levels.js";
import type { Pixels } from "./pixels.js";
import type { PureCells } from "./pure.js";

/** What the pixels of the pure cells tell about two levels. */
export interface Residuals {
  /** By least squares, from those within the limits. */
  readonly levels: Levels;
  /** Covariance of the pixel noise of either state. */
  readonly noise: readonly [NoiseCovariance, NoiseCovariance];
  /** Correlation of the noise of neighbours one column apart (x) and one row apart (y). */
  readonly correlation: { readonly x: number; readonly y: number };
}

/** Residuals beyond this many standard deviations are not noise (debris that was missed, scars); ±4 sd hold all but 1e-3 of a normal
 *  variance, so no correction is made. */
const CLIP = 4;

/** Squared residual up to which a pixel of either state counts, from the noise measured before. */
export const limitsOf = (noise: readonly [NoiseCovariance, NoiseCovariance]): [number, number] => [
  CLIP * CLIP * (noise[0].rr + noise[0].ii),
  CLIP * CLIP * (noise[1].rr + noise[1].ii),
];

/** The same before any noise was measured: white noise of the pixels, and what the cells depart by, which holds all that is correlated. */
export const firstLimits = (white2: number, cellVariance: readonly [number, number]): [number, number] => [
  CLIP * CLIP * (white2 + cellVariance[0]),
  CLIP * CLIP * (white2 + cellVariance[1]),
];

/** Pixels that tell the noise to half a percent. */
const SOME_PIXELS = 40_000;

/** Levels, noise and its correlation in one pass over the pixels, about `expected`; those of a state whose squared residual exceeds its
 *  limit are left out.
 *  @param which every pixel, or rows of cells evenly left out where there are more than tell the noise */
export function residualsOf(
  z: Pixels,
  pure: PureCells,
  expected: Levels,
  limits: readonly [number, number],
  which: "all" | "some",
): Residuals {
  const { rows, cols } = z;
  const every = which === "all" ? 1 : Math.max(1, Math.floor((pure.count[0] + pure.count[1]) / SOME_PIXELS));
  const moments = [new Float64Array(6), new Float64Array(6)];
  const sums = noSums();
  // residuals of this row and the one before, and whose they are: 0 nobody's
  let re = new Float64Array(cols);
  let im = new Float64Array(cols);
  let whose = new Uint8Array(cols);
  let reAbove = new Float64Array(cols);
  let imAbove = new Float64Array(cols);
  let whoseAbove = new Uint8Array(cols);
  const [a0, a1] = expected;
  const dRe = a1.re - a0.re;
  const dIm = a1.im - a0.im;
  let [crossX, ownX, crossY, ownY] = [0, 0, 0, 0];
  for (let i = 0; i < rows; i++) {
    const cellRow = Math.floor(i / SIDE);
    if (cellRow % every !== 0) continue;
    [re, reAbove, im, imAbove, whose, whoseAbove] = [reAbove, re, imAbove, im, whoseAbove, whose];
    // the row before may have been left out
    if (every > 1 && i % SIDE === 0) whoseAbove.fill(0);
    const row = cellRow * pure.cols;
    for (let first = 0, c = row; first < cols; first += SIDE, c++) {
      const k = pure.state[c];
      const last = Math.min(cols, first + SIDE);
      if (k > 1) {
        for (let j = first; j < last; j++) whose[j] = 0;
        continue;
      }
      const u = pure.share[c];
      const er = a0.re + u * dRe;
      const ei = a0.im + u * dIm;
      const limit = limits[k];
      const own = k + 1;
      let [n, sr, si, rr, ri, ii] = [0, 0, 0, 0, 0, 0];
      for (let j = first, p = i * cols + first; j < last; j++, p++) {
        const a = z.re[p] - er;
        const b = z.im[p] - ei;
        const r2 = a * a + b * b;
        if (z.usable[p] === 0 || r2 > limit) {
          whose[j] = 0;
          continue;
        }
        n++;
        sr += a;
        si += b;
        rr += a * a;
        ri += a * b;
        ii += b * b;
        re[j] = a;
        im[j] = b;
        whose[j] = own;
        if (j > 0 && whose[j - 1] === own) {
          const x = re[j - 1];
          const y = im[j - 1];
          crossX += a * x + b * y;
          ownX += r2 + x * x + y * y;
        }
        if (whoseAbove[j] === own) {
          const x = reAbove[j];
          const y = imAbove[j];
          crossY += a * x + b * y;
          ownY += r2 + x * x + y * y;
        }
      }
      const m = moments[k];
      m[0] += n;
      m[1] += sr;
      m[2] += si;
      m[3] += rr;
      m[4] += ri;
      m[5] += ii;
      const v = 1 - u;
      sums.aa += n * v * v;
      sums.ab += n * u * v;
      sums.bb += n * u * u;
      sums.ar += v * sr;
      sums.ai += v * si;
      sums.br += u * sr;
      sums.bi += u * si;
    }
  }
  const [d0, d1] = solveLevels(sums);
  const correlation = (cross: number, own: number): number =>
    own > 0 ? Math.max(-0.95, Math.min(0.95, (2 * cross) / own)) : 0;
  return {
    levels: [
      { re: a0.re + d0.re, im: a0.im + d0.im },
      { re: a1.re + d1.re, im: a1.im + d1.im },
    ],
    noise: [covarianceOf(moments[0]), covarianceOf(moments[1])],
    correlation: { x: correlation(crossX, ownX), y: correlation(crossY, ownY) },
  };
}

/** Covariance from number, sums and sums of products; nothing of fewer than two. */
function covarianceOf([n, sr, si, rr, ri, ii]: Float64Array): NoiseCovariance {
  if (n < 2) return { rr: 0, ri: 0, ii: 0 };
  return {
    rr: (rr - (sr * sr) / n) / (n - 1),
    ri: (ri - (sr * si) / n) / (n - 1),
    ii: (ii - (si * si) / n) / (n - 1),
  };
}
