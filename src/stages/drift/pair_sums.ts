import { selectInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import type { Grid } from "./grid.js";
import type { ScoreParts } from "./noise_covariance.js";
import { removeNuisance } from "./nuisance.js";
import type { Offset, Shifted, Sloped } from "./shifted.js";

export interface Slope {
  readonly xx: number;
  readonly xy: number;
  readonly yx: number;
  readonly yy: number;
}

/** Residuals beyond this many robust standard deviations (a scar, a particle that moved) do not count at all. */
const TUKEY = 6;
/** Side of a block of pixels whose sums are taken as one, pixels. */
const BLOCK = 8;

/** The buffers and sums of one pair: residuals, weights, score and its slope, all on the reference's pixels. */
export class PairSums {
  readonly blocks: { readonly rows: number; readonly cols: number; readonly x: Float64Array; readonly y: Float64Array };
  /** Correlation and ratio of the spreads, nuisance off; set by `residuals`. */
  correlation = 0;
  gain = 1;
  /** Number of places that make the correlation: (Σ c)²/Σ c² over blocks of 2 × 2 blocks, c the block's part of Σ R M. One particle on another makes 1. */
  features = 0;
  private readonly rows: number;
  private readonly cols: number;
  private readonly residual: Float32Array;
  private readonly weight: Float32Array;
  /** Derivative of residual·weight by the residual. */
  private readonly influence: Float32Array;
  /** The reference less its nuisance; the gradient less its own. */
  private readonly level: Float32Array;
  private levelAt: Offset | null = null;
  private readonly gx: Float32Array;
  private readonly gy: Float32Array;

  constructor(
    private readonly reference: Grid,
    private readonly gradient: Sloped["gradient"],
  ) {
    this.rows = reference.rows;
    this.cols = reference.cols;
    const n = this.rows * this.cols;
    this.residual = new Float32Array(n);
    this.weight = new Float32Array(n);
    this.influence = new Float32Array(n);
    this.level = new Float32Array(n);
    this.gx = new Float32Array(n);
    this.gy = new Float32Array(n);
    const blockRows = Math.ceil(this.rows / BLOCK);
    const blockCols = Math.ceil(this.cols / BLOCK);
    this.blocks = {
      rows: blockRows,
      cols: blockCols,
      x: new Float64Array(blockRows * blockCols),
      y: new Float64Array(blockRows * blockCols),
    };
  }

  /** Residuals with nuisance and gain taken off, and their weights. @returns pixels that take part */
  residuals(sampled: Shifted, at: Offset): number {
    const { rows, cols, residual, weight, level } = this;
    const { usable } = this.gradient;
    let pixels = 0;
    for (let p = 0; p < weight.length; p++) {
      weight[p] = usable[p] & sampled.usable[p];
      pixels += weight[p];
    }
    if (pixels === 0) return 0;
    residual.set(sampled.values);
    // which pixels take part hangs on the whole pixels of the shift alone
    if (at.jx !== this.levelAt?.jx || at.iy !== this.levelAt.iy) {
      level.set(this.reference.values);
      removeNuisance(level, weight, rows, cols);
      this.levelAt = at;
    }
    removeNuisance(residual, weight, rows, cols);
    let rr = 0;
    let mm = 0;
    let rm = 0;
    for (let p = 0; p < weight.length; p++) {
      if (weight[p] === 0) continue;
      const r = level[p];
      const m = residual[p];
      rr += r * r;
      mm += m * m;
      rm += r * m;
    }
    if (!(rr > 0 && mm > 0)) return 0;
    this.correlation = rm / Math.sqrt(rr * mm);
    this.features = this.countFeatures();
    // the ratio of the spreads: noise in R would pull down the regression of M on R
    const gain = Math.sqrt(mm / rr);
    this.gain = gain;
    const every = Math.max(1, Math.floor(pixels / 4000));
    const sample = new Float32Array(Math.ceil(pixels / every));
    let k = 0;
    for (let p = 0; p < weight.length; p++) {
      if (weight[p] === 0) continue;
      residual[p] -= gain * level[p];
      if (k % every === 0) sample[k / every] = Math.abs(residual[p]);
      k++;
    }
    const spread = SD_PER_MAD * selectInPlace(sample, sample.length >> 1);
    this.weigh(Math.max(spread, 1e-7 * Math.sqrt(mm / pixels)));
    return pixels;
  }

  private countFeatures(): number {
    const { rows, cols, residual, weight, level } = this;
    const side = 2 * BLOCK;
    const across = Math.ceil(cols / side);
    const parts = new Float64Array(across * Math.ceil(rows / side));
    for (let i = 0; i < rows; i++) {
      const row = Math.floor(i / side) * across;
      for (let j = 0; j < cols; j++) {
        const p = i * cols + j;
        if (weight[p] !== 0) parts[row + ((j / side) | 0)] += level[p] * residual[p];
      }
    }
    let sum = 0;
    let square = 0;
    for (const c of parts) {
      sum += c;
      square += c * c;
    }
    return square > 0 ? (sum * sum) / square : 0;
  }

  private weigh(spread: number): void {
    const { rows, cols, residual, weight, influence } = this;
    const scale = 1 / (TUKEY * spread);
    for (let p = 0; p < weight.length; p++) {
      influence[p] = 0;
      if (weight[p] === 0) continue;
      const u2 = (residual[p] * scale) ** 2;
      const one = 1 - u2;
      weight[p] = u2 < 1 ? one * one : 0;
      influence[p] = u2 < 1 ? one * (1 - 5 * u2) : 0;
    }
    removeNuisance(residual, weight, rows, cols);
  }

  /** The gradient less what the free terms would take of it, for the weights as they are now. To be called before `slope` and all that follows it. */
  levelGradient(): void {
    const { rows, cols, weight, gx, gy } = this;
    gx.set(this.gradient.x);
    gy.set(this.gradient.y);
    removeNuisance(gx, weight, rows, cols);
    removeNuisance(gy, weight, rows, cols);
  }

  /** Σ w G e, kept by blocks as well. */
  score(): { x: number; y: number } {
    const { rows, cols, residual, weight, gx, gy, blocks } = this;
    blocks.x.fill(0);
    blocks.y.fill(0);
    for (let i = 0; i < rows; i++) {
      const row = Math.floor(i / BLOCK) * blocks.cols;
      for (let j = 0; j < cols; j++) {
        const p = i * cols + j;
        if (weight[p] === 0) continue;
        const we = weight[p] * residual[p];
        const b = row + ((j / BLOCK) | 0);
        blocks.x[b] += we * gx[p];
        blocks.y[b] += we * gy[p];
      }
    }
    let x = 0;
    let y = 0;
    for (let b = 0; b < blocks.x.length; b++) {
      x += blocks.x[b];
      y += blocks.y[b];
    }
    return { x, y };
  }

  /** What `stationaryCovariance` needs, in new arrays. */
  parts(): ScoreParts {
    const { rows, cols, residual, weight, gx, gy } = this;
    const n = rows * cols;
    const e = new Float32Array(n);
    const usable = new Uint8Array(n);
    const ux = new Float32Array(n);
    const uy = new Float32Array(n);
    for (let p = 0; p < n; p++) {
      if (weight[p] === 0) continue;
      usable[p] = 1;
      e[p] = weight[p] * residual[p];
      ux[p] = gx[p];
      uy[p] = gy[p];
    }
    return { rows, cols, residual: e, usable, ux, uy };
  }

  /** Σ w G ∂Mᵀ; with the derivative of the weighted residual instead of the weight where the covariance needs it. */
  slope(mx: Shifted, my: Shifted, exact: boolean): Slope {
    return this.slopeWith(mx, my, exact ? this.influence : this.weight, () => 1);
  }

  /** With J the structure's part of ΣGGᵀ and J′ the noise's, the sum's variance is 2J + J′: the frames' own share is 2J/(2J + J′). */
  framed(a: Slope): number {
    const { influence, gx, gy } = this;
    let whole = 0;
    for (let p = 0; p < gx.length; p++) whole += influence[p] * (gx[p] * gx[p] + gy[p] * gy[p]);
    const structure = (a.xx + a.yy) / this.gain;
    return Math.max(0, Math.min(1, (2 * structure) / (structure + whole)));
  }

  /** Slope and score of a shift that grows along the rows, −½ … ½ from the first to the last; `weights` are its factors for the rows of blocks. */
  alongRows(mx: Shifted, my: Shifted): { slope: Slope; score: { x: number; y: number }; weights: Float64Array } {
    const { rows, cols, weight, blocks } = this;
    let sum = 0;
    let sumI = 0;
    for (let i = 0; i < rows; i++) {
      for (let p = i * cols; p < (i + 1) * cols; p++) {
        sum += weight[p];
        sumI += weight[p] * i;
      }
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
    return { slope: this.slopeWith(mx, my, this.influence, (i) => at(i) ** 2), score, weights };
  }

  private slopeWith(mx: Shifted, my: Shifted, weight: Float32Array, factor: (row: number) => number): Slope {
    const { rows, cols, gx, gy } = this;
    let xx = 0;
    let xy = 0;
    let yx = 0;
    let yy = 0;
    let all = 0;
    let seen = 0;
    for (let i = 0; i < rows; i++) {
      const f = factor(i);
      for (let p = i * cols; p < (i + 1) * cols; p++) {
        const w = f * weight[p];
        all += w;
        if (w === 0 || mx.usable[p] === 0) continue;
        seen += w;
        const u = w * gx[p];
        const v = w * gy[p];
        xx += u * mx.values[p];
        xy += u * my.values[p];
        yx += v * mx.values[p];
        yy += v * my.values[p];
      }
    }
    // next to gaps the moving frame's gradient is not known: those pixels stand for their share
    const share = seen > 0 ? all / seen : Number.NaN;
    return { xx: xx * share, xy: xy * share, yx: yx * share, yy: yy * share };
  }
}
