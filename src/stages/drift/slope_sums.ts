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
  /** Σ |G|² over the same pixels. */
  plain = 0;
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
   *  @param slopes where the sampled image has a derivative: a mask on the moving image's pixels, whose index there is `from` more on a grid of `cols` columns */
  add(
    { moved, residual, closeness, gx, gy, xi }: Pixels,
    less: { readonly residual: RowSurface; readonly gx: RowSurface; readonly gy: RowSurface },
    { row0, row1, col0, col1 }: Span,
    slopes: { readonly known: Uint8Array; readonly from: number; readonly cols: number },
  ): void {
    const { cols, blocks, byWeight, byInfluence } = this;
    const { known } = slopes;
    blocks.x.fill(0);
    blocks.y.fill(0);
    byWeight.fill(0);
    byInfluence.fill(0);
    let whole = 0;
    let plain = 0;
    for (let i = row0; i < row1; i++) {
      const block = Math.floor(i / BLOCK) * blocks.cols;
      const [e0, e1, e2] = [less.residual.offset[i], less.residual.tilt[i], less.residual.bow];
      const [u0, u1, u2] = [less.gx.offset[i], less.gx.tilt[i], less.gx.bow];
      const [v0, v1, v2] = [less.gy.offset[i], less.gy.tilt[i], less.gy.bow];
      let wxx = 0;
      let wxy = 0;
      let wyx = 0;
      let wyy = 0;
      let wAll = 0;
      let wSeen = 0;
      let fxx = 0;
      let fxy = 0;
      let fyx = 0;
      let fyy = 0;
      let fAll = 0;
      let fSeen = 0;
      let p = i * cols + col0;
      let q = slopes.from + i * slopes.cols + col0;
      for (let j = col0; j < col1; j++, p++, q++) {
        const one = closeness[p];
        if (one === 0) continue;
        const x = xi[j];
        const w = one * one;
        const f = one * (5 * one - 4);
        const e = w * (residual[p] - e0 - x * (e1 + e2 * x));
        const u = gx[p] - u0 - x * (u1 + u2 * x);
        const v = gy[p] - v0 - x * (v1 + v2 * x);
        const b = block + ((j / BLOCK) | 0);
        blocks.x[b] += e * u;
        blocks.y[b] += e * v;
        const square = u * u + v * v;
        plain += square;
        whole += f * square;
        wAll += w;
        fAll += f;
        if (known[q] === 0) continue;
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
      byWeight.set([wxx, wxy, wyx, wyy, wAll, wSeen], 6 * i);
      byInfluence.set([fxx, fxy, fyx, fyy, fAll, fSeen], 6 * i);
    }
    this.whole = whole;
    this.plain = plain;
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
