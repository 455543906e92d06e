import type { NoiseCovariance } from "../../model/signal.js";
import { SIDE } from "./cells.js";
import type { Levels } from "./cell_levels.js";
import type { Pixels } from "./pixels.js";
import type { PureCells } from "./pure.js";

/** What the pixels of the pure cells tell about two levels. */
export interface Residuals {
  /** From those within the limits. */
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
  const every = which === "all" ? 1 : Math.max(1, Math.floor((pure.count[0] + pure.count[1]) / SOME_PIXELS));
  const sums = [
    new StateSums(z, pure, expected, 0, limits[0]),
    new StateSums(z, pure, expected, 1, limits[1]),
  ] as const;
  const rows = { here: new RowResiduals(z.cols), above: new RowResiduals(z.cols) };
  for (let i = 0; i < z.rows; i++) {
    const cellRow = Math.floor(i / SIDE);
    if (cellRow % every !== 0) continue;
    [rows.here, rows.above] = [rows.above, rows.here];
    rows.here.whose.fill(0);
    // the row before may have been left out
    if (every > 1 && i % SIDE === 0) rows.above.whose.fill(0);
    const end = (cellRow + 1) * pure.cols;
    for (let c = cellRow * pure.cols; c < end;) {
      const k = pure.state[c];
      const start = c;
      do c++;
      while (c < end && pure.state[c] === k);
      if (k <= 1) sums[k].addRun(i, start, c, rows.here, rows.above);
    }
  }
  return {
    levels: levelsFrom(expected, pure, sums),
    noise: [sums[0].noise, sums[1].noise],
    correlation: correlationOf(sums),
  };
}

/** Residuals of one row, and whose they are: 0 nobody's, else the state + 1. */
class RowResiduals {
  readonly re: Float64Array;
  readonly im: Float64Array;
  readonly whose: Uint8Array;
  constructor(cols: number) {
    this.re = new Float64Array(cols);
    this.im = new Float64Array(cols);
    this.whose = new Uint8Array(cols);
  }
}

/** Sums over the pixels of one state. */
class StateSums {
  n = 0;
  re = 0;
  im = 0;
  private rr = 0;
  private ri = 0;
  private ii = 0;
  /** Pairs of neighbours along and across the rows, and the sums of their products Re·Re + Im·Im. */
  pairsX = 0;
  crossX = 0;
  pairsY = 0;
  crossY = 0;

  constructor(
    private readonly z: Pixels,
    private readonly pure: PureCells,
    private readonly expected: Levels,
    private readonly state: 0 | 1,
    private readonly limit: number,
  ) {}

  /** Takes the pixels of row i in the cells from `first` to the one before `end`, all pure and of this state. */
  addRun(i: number, first: number, end: number, here: RowResiduals, above: RowResiduals): void {
    const { z, limit } = this;
    const { share, cols: cellCols } = this.pure;
    const [a0, a1] = this.expected;
    const { re: a0Re, im: a0Im } = a0;
    const dRe = a1.re - a0Re;
    const dIm = a1.im - a0Im;
    const own = this.state + 1;
    const row = Math.floor(i / SIDE) * cellCols;
    const from = SIDE * (first - row);
    const to = Math.min(z.cols, SIDE * (end - row));
    let [n, sr, si, rr, ri, ii] = [0, 0, 0, 0, 0, 0];
    let [pairsX, crossX, pairsY, crossY] = [0, 0, 0, 0];
    // the residual one column back
    let lastRe = 0;
    let lastIm = 0;
    let last = false;
    for (let j = from, p = i * z.cols + from; j < to; j++, p++) {
      const u = share[row + (j >> 1)];
      const a = z.re[p] - a0Re - u * dRe;
      const b = z.im[p] - a0Im - u * dIm;
      if (z.usable[p] === 0 || a * a + b * b > limit) {
        last = false;
        continue;
      }
      n++;
      sr += a;
      si += b;
      rr += a * a;
      ri += a * b;
      ii += b * b;
      if (last) {
        pairsX++;
        crossX += a * lastRe + b * lastIm;
      }
      if (above.whose[j] === own) {
        pairsY++;
        crossY += a * above.re[j] + b * above.im[j];
      }
      here.re[j] = a;
      here.im[j] = b;
      here.whose[j] = own;
      last = true;
      lastRe = a;
      lastIm = b;
    }
    this.n += n;
    this.re += sr;
    this.im += si;
    this.rr += rr;
    this.ri += ri;
    this.ii += ii;
    this.pairsX += pairsX;
    this.crossX += crossX;
    this.pairsY += pairsY;
    this.crossY += crossY;
  }

  get noise(): NoiseCovariance {
    const { n, re, im } = this;
    if (n < 2) return { rr: 0, ri: 0, ii: 0 };
    return {
      rr: (this.rr - (re * re) / n) / (n - 1),
      ri: (this.ri - (re * im) / n) / (n - 1),
      ii: (this.ii - (im * im) / n) / (n - 1),
    };
  }

  /** Mean square of the residuals. */
  get square(): number {
    return this.n > 0 ? (this.rr + this.ii) / this.n : 0;
  }
}

/** The levels for which the mean residual of either state vanishes: it holds (1 − t) of the error of its own level and t of the other's,
 *  with t the mean share of the wrong state in its cells. */
function levelsFrom(expected: Levels, pure: PureCells, [s0, s1]: readonly [StateSums, StateSums]): Levels {
  const mean = (s: StateSums, part: "re" | "im"): number => (s.n > 0 ? s[part] / s.n : 0);
  const [t0, t1] = pure.tail;
  const det = 1 - t0 - t1;
  const solve = (part: "re" | "im"): [number, number] => {
    const m0 = mean(s0, part);
    const m1 = mean(s1, part);
    return [((1 - t1) * m0 - t0 * m1) / det, ((1 - t0) * m1 - t1 * m0) / det];
  };
  const re = solve("re");
  const im = solve("im");
  const [a0, a1] = expected;
  return [
    { re: a0.re + re[0], im: a0.im + im[0] },
    { re: a1.re + re[1], im: a1.im + im[1] },
  ];
}

function correlationOf([s0, s1]: readonly [StateSums, StateSums]): { readonly x: number; readonly y: number } {
  const of = (cross: number, own: number): number => (own > 0 ? Math.max(-0.95, Math.min(0.95, cross / own)) : 0);
  return {
    x: of(s0.crossX + s1.crossX, s0.pairsX * s0.square + s1.pairsX * s1.square),
    y: of(s0.crossY + s1.crossY, s0.pairsY * s0.square + s1.pairsY * s1.square),
  };
}
