import type { RowSurface } from "./nuisance.js";
import type { PairBuffers } from "./pair_buffers.js";
import type { Span } from "./shifted.js";

export interface Slope {
  readonly xx: number;
  readonly xy: number;
  readonly yx: number;
  readonly yy: number;
}

/** Side of a block of pixels whose sums are taken as one, pixels. */
export const BLOCK = 8;
const BLOCK_SHIFT = 3;
/** In an overlap of more pixels every second row stands for its neighbour in the slope, which need not be better than to a percent. */
const MANY = 40_000;

/** Pixel buffers with the reference's gradient, and ξ of each column. */
type Pixels = Pick<PairBuffers, "moved" | "residual" | "closeness"> & {
  readonly gx: Float32Array;
  readonly gy: Float32Array;
  readonly xi: Float64Array;
};

/** The score Σ w G e of a pair and its slope, G the reference's gradient and e the residual, both less their nuisance. */
export class SlopeSums {
  /** Score by blocks. */
  readonly blocks: { readonly rows: number; readonly cols: number; readonly x: Float64Array; readonly y: Float64Array };
  /** Σ infl·|G|², infl the derivative of weight·residual by the residual. */
  whole = 0;
  /** Σ |G|² over the same pixels, and Σ w e². */
  plain = 0;
  squares = 0;
  /** Each row's Σ over G ∂Mᵀ (xx, xy, yx, yy), the sum of its factors, and their sum where ∂M is known: by the weight, then by the influence. */
  private readonly byWeight: Float64Array;
  private readonly byInfluence: Float64Array;

  constructor(
    private readonly rows: number,
    private readonly cols: number,
  ) {
    const blockRows = Math.ceil(rows / BLOCK);
    const blockCols = Math.ceil(cols / BLOCK);
    const n = blockRows * blockCols;
    this.blocks = { rows: blockRows, cols: blockCols, x: new Float64Array(n), y: new Float64Array(n) };
    this.byWeight = new Float64Array(6 * rows);
    this.byInfluence = new Float64Array(6 * rows);
  }

  /** Sums anew over the pixels of a span.
   *  @param samples where the moving image can be sampled, on its own pixels: the index there is `from` more, on a grid of `cols` columns */
  add(
    { moved, residual, closeness, gx, gy, xi }: Pixels,
    less: { readonly residual: RowSurface; readonly gx: RowSurface; readonly gy: RowSurface },
    { row0, row1, col0, col1 }: Span,
    samples: { readonly known: Uint8Array; readonly from: number; readonly cols: number },
  ): void {
    const { cols, blocks, byWeight, byInfluence } = this;
    const { known } = samples;
    const below = 2 * samples.cols;
    blocks.x.fill(0);
    blocks.y.fill(0);
    byWeight.fill(0);
    byInfluence.fill(0);
    const every = (row1 - row0) * (col1 - col0) > MANY ? 2 : 1;
    let whole = 0;
    let plain = 0;
    let squares = 0;
    for (let i = row0; i < row1; i++) {
      const [e0, e1, e2] = [less.residual.offset[i], less.residual.tilt[i], less.residual.bow];
      const [u0, u1, u2] = [less.gx.offset[i], less.gx.tilt[i], less.gx.bow];
      const [v0, v1, v2] = [less.gy.offset[i], less.gy.tilt[i], less.gy.bow];
      const block = (i >> BLOCK_SHIFT) * blocks.cols;
      let wAll = 0;
      let fAll = 0;
      for (let from = col0; from < col1;) {
        // to the end of this block
        const b = from >> BLOCK_SHIFT;
        const to = Math.min(col1, (b + 1) << BLOCK_SHIFT);
        let blockX = 0;
        let blockY = 0;
        for (let j = from, p = i * cols + from; j < to; j++, p++) {
          const one = closeness[p];
          if (one === 0) continue;
          const x = xi[j];
          const w = one * one;
          const f = one * (5 * one - 4);
          const r = residual[p] - e0 - x * (e1 + e2 * x);
          const e = w * r;
          squares += e * r;
          const u = gx[p] - u0 - x * (u1 + u2 * x);
          const v = gy[p] - v0 - x * (v1 + v2 * x);
          blockX += e * u;
          blockY += e * v;
          const square = u * u + v * v;
          plain += square;
          whole += f * square;
          wAll += w;
          fAll += f;
        }
        blocks.x[block + b] += blockX;
        blocks.y[block + b] += blockY;
        from = to;
      }
      byWeight[6 * i + 4] = wAll;
      byInfluence[6 * i + 4] = fAll;
      if (i % every !== 0) continue;
      let wxx = 0;
      let wxy = 0;
      let wyx = 0;
      let wyy = 0;
      let wSeen = 0;
      let fxx = 0;
      let fxy = 0;
      let fyx = 0;
      let fyy = 0;
      let fSeen = 0;
      let p = i * cols + col0;
      let q = samples.from + i * samples.cols + col0;
      for (let j = col0; j < col1; j++, p++, q++) {
        const one = closeness[p];
        if (one === 0) continue;
        // gaps are wider than the step from one of these to the next
        if ((known[q - 2] & known[q + 2] & known[q - below] & known[q + below]) === 0) continue;
        const x = xi[j];
        const w = one * one;
        const f = one * (5 * one - 4);
        const u = gx[p] - u0 - x * (u1 + u2 * x);
        const v = gy[p] - v0 - x * (v1 + v2 * x);
        // the derivatives of a shifted image are the shifted derivatives
        const mx = (8 * (moved[p + 1] - moved[p - 1]) - (moved[p + 2] - moved[p - 2])) / 12;
        const my = (8 * (moved[p + cols] - moved[p - cols]) - (moved[p + 2 * cols] - moved[p - 2 * cols])) / 12;
        wSeen += w;
        fSeen += f;
        const xx = u * mx;
        const xy = u * my;
        const yx = v * mx;
        const yy = v * my;
        wxx += w * xx;
        wxy += w * xy;
        wyx += w * yx;
        wyy += w * yy;
        fxx += f * xx;
        fxy += f * xy;
        fyx += f * yx;
        fyy += f * yy;
      }
      set(byWeight, 6 * i, wxx, wxy, wyx, wyy, wSeen);
      set(byInfluence, 6 * i, fxx, fxy, fyx, fyy, fSeen);
    }
    this.whole = whole;
    this.plain = plain;
    this.squares = squares;
  }

  /** Σ w G e. */
  score(): { x: number; y: number } {
    let x = 0;
    let y = 0;
    for (let b = 0; b < this.blocks.x.length; b++) {
      x += this.blocks.x[b];
      y += this.blocks.y[b];
    }
    return { x, y };
  }

  /** Σ w G ∂Mᵀ; with the derivative of the weighted residual instead of the weight where the slope is to be exact. */
  slope(exact: boolean): Slope {
    return this.slopeOf(exact ? this.byInfluence : this.byWeight, () => 1);
  }

  /** Slope and score of a shift that grows along the rows, −½ … ½ from the first to the last; `weights` are its factors for the rows of blocks. */
  alongRows(): { slope: Slope; score: { x: number; y: number }; weights: Float64Array } {
    const { rows, blocks, byWeight } = this;
    let sum = 0;
    let sumI = 0;
    for (let i = 0; i < rows; i++) {
      sum += byWeight[6 * i + 4];
      sumI += byWeight[6 * i + 4] * i;
    }
    const middle = sumI / sum;
    const at = (i: number): number => (i - middle) / rows;
    const weights = Float64Array.from({ length: blocks.rows }, (_, b) => at(b * BLOCK + (BLOCK - 1) / 2));
    const score = { x: 0, y: 0 };
    for (let b = 0; b < blocks.rows; b++) {
      for (let c = 0; c < blocks.cols; c++) {
        score.x += weights[b] * blocks.x[b * blocks.cols + c];
        score.y += weights[b] * blocks.y[b * blocks.cols + c];
      }
    }
    return { slope: this.slopeOf(this.byInfluence, (i) => at(i) ** 2), score, weights };
  }

  private slopeOf(by: Float64Array, factor: (row: number) => number): Slope {
    const s = new Float64Array(6);
    for (let i = 0; i < this.rows; i++) {
      const f = factor(i);
      for (let k = 0; k < 6; k++) s[k] += f * by[6 * i + k];
    }
    // next to gaps the moving frame's gradient is not known: those pixels stand for their share
    const share = s[5] > 0 ? s[4] / s[5] : Number.NaN;
    return { xx: s[0] * share, xy: s[1] * share, yx: s[2] * share, yy: s[3] * share };
  }
}

function set(a: Float64Array, at: number, xx: number, xy: number, yx: number, yy: number, seen: number): void {
  a[at] = xx;
  a[at + 1] = xy;
  a[at + 2] = yx;
  a[at + 3] = yy;
  a[at + 5] = seen;
}
