import { selectInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import type { Grid } from "./grid.js";
import { stationaryCovariance, type ScoreParts } from "./noise_covariance.js";
import { larger, scoreCovariance, type Sym2 } from "./score_covariance.js";
import { sampleShifted, type Shifted, type Sloped } from "./shifted.js";

export interface FineShift {
  /** The feature at (row, col) of the reference lies at (row + dy, col + dx) of the moving frame; pixels. */
  readonly dx: number;
  readonly dy: number;
  /** Covariance of (dx, dy), px². */
  readonly covariance: Sym2;
  /** Share of the covariance that comes of either frame's noise on the other's structure, the rest of noise on noise. */
  readonly framed: number;
  /** Shift at the reference's last row minus that at its first, with standard deviations; pixels. */
  readonly slope: { readonly x: number; readonly y: number; readonly sdX: number; readonly sdY: number };
  /** Correlation of the two over the overlap, row offsets off. */
  readonly correlation: number;
  /** Pixels that entered. */
  readonly pixels: number;
  readonly iterations: number;
}

export interface FineOptions {
  /** A shift that walks farther than this from its start has left the peak; pixels. */
  readonly leashPx: number;
  /** Stop when a step is shorter; pixels. */
  readonly tolerancePx: number;
  readonly leastPixels: number;
  /** Noise is correlated over less than this, pixels; null: a rough covariance will do. */
  readonly reachPx: { readonly x: number; readonly y: number } | null;
}

const ITERATIONS = 25;
/** Residuals beyond this many robust standard deviations (a scar, a particle that moved) do not count at all. */
const TUKEY = 6;

/** Shift between two equally blurred frames to a small fraction of a pixel.
 *
 *  Solves Σ w G̃ (M(x + d) − b R(x) − a_row) = 0 for d, where G is the gradient of R and the tilde takes the mean off every row: the
 *  offset of each row is free (line noise of either frame drops out), and so is one gain b. As G and the noise of M are independent and the
 *  noise of R is uncorrelated with its own gradient, the solution is not drawn towards half pixels by the noise that
 *  interpolation averages, as the minimum of the squared difference is. For the same reason the slope of the equation is taken from the
 *  gradients of both frames, Σ G̃ ∂Mᵀ: the product of one gradient with itself is inflated by noise.
 *  Weights are Tukey's; the covariance is that of the sums as they scatter from block to block (`scoreCovariance`), so the correlation of
 *  the noise that the blur makes, and noise that the instrument had before, are in it.
 *  @returns null where the equation cannot be solved or the shift runs away
 *  Source: inverse compositional Gauss–Newton, Baker & Matthews 2004, Int. J. Comput. Vis. 56, 221; gain and offset as in
 *  Evangelidis & Psarakis 2008, IEEE Trans. Pattern Anal. Mach. Intell. 30, 1858; weights Beaton & Tukey 1974, Technometrics 16, 147. */
export function fineShift(
  reference: Sloped,
  moving: Sloped,
  start: { readonly dx: number; readonly dy: number },
  options: FineOptions,
): FineShift | null {
  const { rows, cols } = reference.grid;
  const work = new Work(reference.grid, reference.gradient);
  const slopesAt = (dx: number, dy: number): [Shifted, Shifted] => [
    sampleShifted(moving.gradientX, rows, cols, dx, dy),
    sampleShifted(moving.gradientY, rows, cols, dx, dy),
  ];
  let { dx, dy } = start;
  let slope: { xx: number; xy: number; yx: number; yy: number } | null = null;
  let iteration = 0;
  let step = Number.POSITIVE_INFINITY;
  for (; iteration < ITERATIONS && step > options.tolerancePx; iteration++) {
    const sampled = sampleShifted(moving.grid, rows, cols, dx, dy);
    if (work.residuals(sampled) < options.leastPixels) return null;
    // the gradients change little on the way: once at the start, once near the end
    if (iteration === 0 || (iteration <= 3 && step > 0.1)) {
      slope = work.slope(...slopesAt(dx, dy), false);
    }
    const score = work.score();
    const delta = slope === null ? null : solve(slope, score.x, score.y);
    if (delta === null) return null;
    const length = Math.hypot(delta.x, delta.y);
    const shorter = length > 1 ? 1 / length : 1;
    dx -= shorter * delta.x;
    dy -= shorter * delta.y;
    if (!(Math.hypot(dx - start.dx, dy - start.dy) <= options.leashPx)) return null;
    step = length;
  }
  if (step > options.tolerancePx) return null;

  const pixels = work.residuals(sampleShifted(moving.grid, rows, cols, dx, dy));
  if (pixels < options.leastPixels) return null;
  const [gx, gy] = slopesAt(dx, dy);
  const a = work.slope(gx, gy, true);
  const score = work.score();
  const scatter = scoreCovariance(work.blocks.x, work.blocks.y, work.blocks.rows, work.blocks.cols, null);
  const reach = options.reachPx;
  const alike = reach === null ? null : stationaryCovariance(work.parts(), reach.x, reach.y);
  const covariance = alike === null ? scatter : larger(alike, scatter);
  const level = work.slopeAlongRows(gx, gy);
  const tilted = scoreCovariance(work.blocks.x, work.blocks.y, work.blocks.rows, work.blocks.cols, level.weights);
  const mean = sandwich(a, covariance);
  const tilt = sandwich(level.slope, tilted);
  const tiltBy = solve(level.slope, level.score.x, level.score.y);
  if (mean === null || tilt === null || tiltBy === null || !Number.isFinite(score.x + score.y)) return null;
  return {
    dx,
    dy,
    covariance: mean,
    framed: work.framed(a),
    slope: { x: -tiltBy.x, y: -tiltBy.y, sdX: Math.sqrt(tilt.xx), sdY: Math.sqrt(tilt.yy) },
    correlation: work.correlation,
    pixels,
    iterations: iteration,
  };
}

interface Slope {
  readonly xx: number;
  readonly xy: number;
  readonly yx: number;
  readonly yy: number;
}

function solve(a: Slope, x: number, y: number): { x: number; y: number } | null {
  const det = a.xx * a.yy - a.xy * a.yx;
  if (!(a.xx > 0 && a.yy > 0 && det > 1e-4 * a.xx * a.yy)) return null;
  return { x: (a.yy * x - a.xy * y) / det, y: (a.xx * y - a.yx * x) / det };
}

/** A⁻¹ S A⁻ᵀ. */
function sandwich(a: Slope, s: Sym2): Sym2 | null {
  const u = solve(a, s.xx, s.xy);
  const v = solve(a, s.xy, s.yy);
  if (u === null || v === null) return null;
  const p = solve(a, u.x, v.x);
  const q = solve(a, u.y, v.y);
  if (p === null || q === null || !(p.x > 0 && q.y > 0)) return null;
  return { xx: p.x, xy: 0.5 * (p.y + q.x), yy: q.y };
}

/** Side of a block of pixels whose sums are taken as one, pixels. */
const BLOCK = 8;

/** The buffers and sums of one pair. */
class Work {
  readonly blocks: { readonly rows: number; readonly cols: number; readonly x: Float64Array; readonly y: Float64Array };
  correlation = 0;
  gain = 1;
  private readonly rows: number;
  private readonly cols: number;
  private readonly residual: Float32Array;
  private readonly weight: Float32Array;
  /** Derivative of residual·weight by the residual. */
  private readonly influence: Float32Array;
  /** Weighted row means of the reference's gradient. */
  private readonly meanX: Float64Array;
  private readonly meanY: Float64Array;

  constructor(
    private readonly reference: Grid,
    private readonly gradient: { readonly x: Float32Array; readonly y: Float32Array; readonly usable: Uint8Array },
  ) {
    this.rows = reference.rows;
    this.cols = reference.cols;
    const n = this.rows * this.cols;
    this.residual = new Float32Array(n);
    this.weight = new Float32Array(n);
    this.influence = new Float32Array(n);
    this.meanX = new Float64Array(this.rows);
    this.meanY = new Float64Array(this.rows);
    const blockRows = Math.ceil(this.rows / BLOCK);
    const blockCols = Math.ceil(this.cols / BLOCK);
    this.blocks = {
      rows: blockRows,
      cols: blockCols,
      x: new Float64Array(blockRows * blockCols),
      y: new Float64Array(blockRows * blockCols),
    };
  }

  /** Residuals with row offsets and gain taken off, and their weights. @returns pixels that take part */
  residuals(sampled: Shifted): number {
    const { rows, cols, residual, weight } = this;
    const { usable } = this.gradient;
    const r = this.reference.values;
    const m = sampled.values;
    const meanR = new Float64Array(rows);
    const meanM = new Float64Array(rows);
    let rr = 0;
    let mm = 0;
    let rm = 0;
    let pixels = 0;
    for (let i = 0; i < rows; i++) {
      let n = 0;
      let sr = 0;
      let sm = 0;
      let srr = 0;
      let smm = 0;
      let srm = 0;
      for (let p = i * cols; p < (i + 1) * cols; p++) {
        const both = usable[p] & sampled.usable[p];
        weight[p] = both;
        if (both === 0) continue;
        n++;
        sr += r[p];
        sm += m[p];
        srr += r[p] * r[p];
        smm += m[p] * m[p];
        srm += r[p] * m[p];
      }
      if (n === 0) continue;
      pixels += n;
      meanR[i] = sr / n;
      meanM[i] = sm / n;
      rr += srr - (sr * sr) / n;
      mm += smm - (sm * sm) / n;
      rm += srm - (sr * sm) / n;
    }
    if (!(rr > 0 && mm > 0)) return 0;
    this.correlation = rm / Math.sqrt(rr * mm);
    // the ratio of the spreads: noise in R would pull down the regression of M on R
    const gain = Math.sqrt(mm / rr);
    this.gain = gain;
    const every = Math.max(1, Math.floor(pixels / 4000));
    const sample = new Float32Array(Math.ceil(pixels / every));
    let k = 0;
    for (let i = 0; i < rows; i++) {
      for (let p = i * cols; p < (i + 1) * cols; p++) {
        if (weight[p] === 0) continue;
        residual[p] = m[p] - meanM[i] - gain * (r[p] - meanR[i]);
        if (k % every === 0) sample[k / every] = Math.abs(residual[p]);
        k++;
      }
    }
    const spread = SD_PER_MAD * selectInPlace(sample, sample.length >> 1);
    this.weigh(Math.max(spread, 1e-7 * Math.sqrt(mm / pixels)));
    return pixels;
  }

  private weigh(spread: number): void {
    const { rows, cols, residual, weight, influence, meanX, meanY } = this;
    const { x, y } = this.gradient;
    const scale = 1 / (TUKEY * spread);
    for (let i = 0; i < rows; i++) {
      let sum = 0;
      let sx = 0;
      let sy = 0;
      let se = 0;
      for (let p = i * cols; p < (i + 1) * cols; p++) {
        if (weight[p] === 0) {
          influence[p] = 0;
          continue;
        }
        const u2 = (residual[p] * scale) ** 2;
        const one = 1 - u2;
        const w = u2 < 1 ? one * one : 0;
        weight[p] = w;
        influence[p] = u2 < 1 ? one * (1 - 5 * u2) : 0;
        sum += w;
        sx += w * x[p];
        sy += w * y[p];
        se += w * residual[p];
      }
      if (sum === 0) continue;
      meanX[i] = sx / sum;
      meanY[i] = sy / sum;
      const me = se / sum;
      for (let p = i * cols; p < (i + 1) * cols; p++) residual[p] -= me;
    }
  }

  /** Σ w G̃ e, kept by blocks as well. */
  score(): { x: number; y: number } {
    const { rows, cols, residual, weight, meanX, meanY, blocks } = this;
    const { x, y } = this.gradient;
    blocks.x.fill(0);
    blocks.y.fill(0);
    for (let i = 0; i < rows; i++) {
      const row = Math.floor(i / BLOCK) * blocks.cols;
      for (let j = 0; j < cols; j++) {
        const p = i * cols + j;
        if (weight[p] === 0) continue;
        const we = weight[p] * residual[p];
        const b = row + ((j / BLOCK) | 0);
        blocks.x[b] += we * (x[p] - meanX[i]);
        blocks.y[b] += we * (y[p] - meanY[i]);
      }
    }
    let sx = 0;
    let sy = 0;
    for (let b = 0; b < blocks.x.length; b++) {
      sx += blocks.x[b];
      sy += blocks.y[b];
    }
    return { x: sx, y: sy };
  }

  /** What `stationaryCovariance` needs, in new arrays. */
  parts(): ScoreParts {
    const { rows, cols, residual, weight, meanX, meanY } = this;
    const { x, y } = this.gradient;
    const n = rows * cols;
    const e = new Float32Array(n);
    const usable = new Uint8Array(n);
    const ux = new Float32Array(n);
    const uy = new Float32Array(n);
    for (let i = 0; i < rows; i++) {
      for (let p = i * cols; p < (i + 1) * cols; p++) {
        if (weight[p] === 0) continue;
        usable[p] = 1;
        e[p] = weight[p] * residual[p];
        ux[p] = x[p] - meanX[i];
        uy[p] = y[p] - meanY[i];
      }
    }
    return { rows, cols, residual: e, usable, ux, uy };
  }

  /** Σ w G̃ ∂Mᵀ; with the derivative of the weighted residual instead of the weight where the covariance needs it. */
  slope(gx: Shifted, gy: Shifted, exact: boolean): Slope {
    return this.slopeWith(gx, gy, exact ? this.influence : this.weight, () => 1);
  }

  /** With J the structure's part of ΣG̃G̃ᵀ and J′ the noise's, the sum's variance is 2J + J′: the frames' own share is 2J/(2J + J′). */
  framed(a: Slope): number {
    const { rows, cols, influence, meanX, meanY } = this;
    const { x, y } = this.gradient;
    let whole = 0;
    for (let i = 0; i < rows; i++) {
      for (let p = i * cols; p < (i + 1) * cols; p++) {
        whole += influence[p] * ((x[p] - meanX[i]) ** 2 + (y[p] - meanY[i]) ** 2);
      }
    }
    const structure = (a.xx + a.yy) / this.gain;
    return Math.max(0, Math.min(1, (2 * structure) / (structure + whole)));
  }

  /** The same for a shift that grows along the rows, −½ … ½ from the first to the last. */
  slopeAlongRows(gx: Shifted, gy: Shifted): { slope: Slope; score: { x: number; y: number }; weights: Float64Array } {
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
    return { slope: this.slopeWith(gx, gy, this.influence, (i) => at(i) ** 2), score, weights };
  }

  private slopeWith(gx: Shifted, gy: Shifted, weight: Float32Array, factor: (row: number) => number): Slope {
    const { rows, cols, meanX, meanY } = this;
    const { x, y } = this.gradient;
    const out = { xx: 0, xy: 0, yx: 0, yy: 0 };
    let all = 0;
    let seen = 0;
    for (let i = 0; i < rows; i++) {
      const f = factor(i);
      for (let p = i * cols; p < (i + 1) * cols; p++) {
        const w = f * weight[p];
        all += w;
        if (w === 0 || gx.usable[p] === 0) continue;
        seen += w;
        const u = w * (x[p] - meanX[i]);
        const v = w * (y[p] - meanY[i]);
        out.xx += u * gx.values[p];
        out.xy += u * gy.values[p];
        out.yx += v * gx.values[p];
        out.yy += v * gy.values[p];
      }
    }
    // next to gaps the moving frame's gradient is not known: those pixels stand for their share
    const share = seen > 0 ? all / seen : Number.NaN;
    return { xx: out.xx * share, xy: out.xy * share, yx: out.yx * share, yy: out.yy * share };
  }
}
