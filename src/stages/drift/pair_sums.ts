import { selectInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import type { ScoreParts } from "./noise_covariance.js";
import { RowFit, RowSurface } from "./nuisance.js";
import { buffersFor, type PairBuffers } from "./pair_buffers.js";
import { sampleShifted, spanOf, type Offset, type Sloped, type Span } from "./shifted.js";
import { BLOCK, SlopeSums, type Slope } from "./slope_sums.js";

/** Residuals beyond this many robust standard deviations (a scar, a particle that moved) do not count at all. */
const TUKEY = 6;
/** Residuals from which their spread is told. */
const SAMPLE = 4000;

/** Residuals, weights, score and its slope of one pair, all on the reference's pixels. One reading at a shift is four passes over the overlap: sampling,
 *  the sums of the nuisance, the weights, the score; buffers are shared by all pairs, one after the other. */
export class PairSums {
  readonly sums: SlopeSums;
  /** Correlation and ratio of the spreads, nuisance off. */
  correlation = 0;
  gain = 1;
  /** Number of places that make the correlation: (Σ c)²/Σ c² over blocks of 2 × 2 blocks, c the block's part of Σ R M. One particle on another makes 1. */
  features = 0;
  private readonly rows: number;
  private readonly cols: number;
  private readonly buffers: PairBuffers;
  private readonly fit: RowFit;
  private readonly values: Float64Array;
  /** Of the residual under the weights, and of the gradient. */
  private readonly ofResidual: RowSurface;
  private readonly ofX: RowSurface;
  private readonly ofY: RowSurface;
  private span: Span = { row0: 0, row1: 0, col0: 0, col1: 0 };
  private chosenAt: Offset | null = null;
  /** Pixels of the overlap, and Σ R² over them, nuisance off. */
  private pixels = 0;
  private levelSquares = 0;
  /** Sums of the pixels that both know, before any weighting. */
  private readonly counts: Float64Array;

  constructor(
    private readonly reference: Sloped,
    private readonly moving: Sloped,
  ) {
    this.rows = reference.grid.rows;
    this.cols = reference.grid.cols;
    this.buffers = buffersFor(this.rows, this.cols);
    this.fit = new RowFit(this.rows, this.cols);
    this.counts = new Float64Array(5 * this.rows);
    this.values = new Float64Array(3 * this.rows);
    this.ofResidual = new RowSurface(this.rows);
    this.ofX = new RowSurface(this.rows);
    this.ofY = new RowSurface(this.rows);
    this.sums = new SlopeSums(this.rows, this.cols);
  }

  /** Everything at a shift. @returns pixels that take part; 0 where nothing can be said */
  read(at: Offset): number {
    // which pixels take part hangs on the whole pixels of the shift alone
    if (at.jx !== this.chosenAt?.jx || at.iy !== this.chosenAt.iy) this.choosePixels(at);
    if (this.pixels === 0) return 0;
    sampleShifted(this.moving.grid, at, this.span, this.cols, this.buffers.moved);
    if (!this.level()) return 0;
    this.weigh(this.spread());
    this.sums.add(
      { ...this.buffers, gx: this.reference.gradient.x, gy: this.reference.gradient.y, xi: this.fit.xi },
      { residual: this.ofResidual, gx: this.ofX, gy: this.ofY },
      this.span,
      { known: this.moving.samples, from: at.iy * this.moving.grid.cols + at.jx, cols: this.moving.grid.cols },
    );
    return this.pixels;
  }

  /** Share of the covariance that is the frames' own: with J the structure's part of ΣGGᵀ and J′ the noise's, the sum's variance is 2J + J′. */
  framed(a: Slope): number {
    const structure = (a.xx + a.yy) / this.gain;
    return Math.max(0, Math.min(1, (2 * structure) / (structure + this.sums.whole)));
  }

  /** Pixels that take part, the reference less its nuisance under them. */
  private choosePixels(at: Offset): void {
    const { rows, cols, fit, values } = this;
    const { mask, level } = this.buffers;
    this.chosenAt = at;
    this.span = spanOf(this.moving.grid, rows, cols, at);
    const { row0, row1, col0, col1 } = this.span;
    const { usable } = this.reference.gradient;
    const image = this.reference.grid.values;
    const { samples } = this.moving;
    const across = this.moving.grid.cols;
    fit.weights.fill(0);
    values.fill(0);
    this.pixels = 0;
    for (let i = row0; i < row1; i++) {
      let s0 = 0;
      let s1 = 0;
      let s2 = 0;
      let s3 = 0;
      let s4 = 0;
      let v0 = 0;
      let v1 = 0;
      let v2 = 0;
      let p = i * cols + col0;
      let q = (i + at.iy) * across + col0 + at.jx;
      for (let j = col0; j < col1; j++, p++, q++) {
        const known = usable[p] & samples[q];
        mask[p] = known;
        if (known === 0) continue;
        const x = fit.xi[j];
        const xx = x * x;
        const v = image[p];
        s0++;
        s1 += x;
        s2 += xx;
        s3 += xx * x;
        s4 += xx * xx;
        v0 += v;
        v1 += x * v;
        v2 += xx * v;
      }
      this.pixels += s0;
      setRow(fit.weights, i, s0, s1, s2, s3, s4);
      setMoments(values, i, v0, v1, v2);
    }
    this.counts.set(fit.weights);
    if (this.pixels === 0) return;
    const surface = this.ofX;
    fit.solve(values, surface);
    let squares = 0;
    for (let i = row0; i < row1; i++) {
      const [offset, tilt] = [surface.offset[i], surface.tilt[i]];
      let p = i * cols + col0;
      for (let j = col0; j < col1; j++, p++) {
        if (mask[p] === 0) continue;
        const x = fit.xi[j];
        const r = image[p] - offset - x * (tilt + surface.bow * x);
        level[p] = r;
        squares += r * r;
      }
    }
    this.levelSquares = squares;
  }

  /** Nuisance of the sampled image under the plain mask, gain and correlation. @returns false where either image is flat */
  private level(): boolean {
    const { cols, fit, values, span } = this;
    const { mask, level, moved } = this.buffers;
    fit.weights.set(this.counts);
    values.fill(0);
    let mm = 0;
    let rm = 0;
    for (let i = span.row0; i < span.row1; i++) {
      let v0 = 0;
      let v1 = 0;
      let v2 = 0;
      let p = i * cols + span.col0;
      for (let j = span.col0; j < span.col1; j++, p++) {
        if (mask[p] === 0) continue;
        const x = fit.xi[j];
        const v = moved[p];
        const xv = x * v;
        v0 += v;
        v1 += xv;
        v2 += x * xv;
        mm += v * v;
        // the reference has no nuisance left, so what the moving frame has adds nothing to the product
        rm += v * level[p];
      }
      setMoments(values, i, v0, v1, v2);
    }
    const whole = mm;
    mm -= fit.solve(values, this.ofResidual);
    if (!(this.levelSquares > 0 && mm > 1e-12 * whole)) return false;
    this.correlation = rm / Math.sqrt(this.levelSquares * mm);
    // the ratio of the spreads: noise in R would pull down the regression of M on R
    this.gain = Math.sqrt(mm / this.levelSquares);
    return true;
  }

  /** Robust standard deviation of the residuals, from some of them spread over the overlap. */
  private spread(): number {
    const { cols, fit, span, gain, ofResidual } = this;
    const { mask, level, moved, sample } = this.buffers;
    const { row0, row1, col0, col1 } = span;
    const every = Math.max(1, Math.floor(((row1 - row0) * (col1 - col0)) / SAMPLE));
    let n = 0;
    for (let k = 0; k < (row1 - row0) * (col1 - col0) && n < sample.length; k += every) {
      const i = row0 + Math.floor(k / (col1 - col0));
      // the columns shift from row to row so that no stripe of the image is left out
      const j = col0 + ((k + 7 * i) % (col1 - col0));
      const p = i * cols + j;
      if (mask[p] === 0) continue;
      const x = fit.xi[j];
      sample[n++] = Math.abs(
        moved[p] - ofResidual.offset[i] - x * (ofResidual.tilt[i] + ofResidual.bow * x) - gain * level[p],
      );
    }
    const least = 1e-7 * gain * Math.sqrt(this.levelSquares / this.pixels);
    return n === 0 ? least : Math.max(SD_PER_MAD * selectInPlace(sample, n >> 1, n), least);
  }

  /** Residuals and Tukey's weights, and the nuisance of residual and gradient under these. */
  private weigh(spread: number): void {
    const { rows, cols, fit, span, gain, ofResidual } = this;
    const { mask, level, moved, residual, closeness } = this.buffers;
    const { x: gradientX, y: gradientY } = this.reference.gradient;
    const scale = 1 / (TUKEY * spread);
    const across = Math.ceil(cols / (2 * BLOCK));
    const parts = new Float64Array(across * Math.ceil(rows / (2 * BLOCK)));
    const valuesX = new Float64Array(3 * rows);
    const valuesY = new Float64Array(3 * rows);
    this.values.fill(0);
    fit.weights.fill(0);
    for (let i = span.row0; i < span.row1; i++) {
      const offset = ofResidual.offset[i];
      const tilt = ofResidual.tilt[i];
      const bow = ofResidual.bow;
      const part = Math.floor(i / (2 * BLOCK)) * across;
      let s0 = 0;
      let s1 = 0;
      let s2 = 0;
      let s3 = 0;
      let s4 = 0;
      let e0 = 0;
      let e1 = 0;
      let e2 = 0;
      let x0 = 0;
      let x1 = 0;
      let x2 = 0;
      let y0 = 0;
      let y1 = 0;
      let y2 = 0;
      let p = i * cols + span.col0;
      for (let j = span.col0; j < span.col1; j++, p++) {
        if (mask[p] === 0) {
          closeness[p] = 0;
          continue;
        }
        const x = fit.xi[j];
        const r = level[p];
        const m = moved[p] - offset - x * (tilt + bow * x);
        const e = m - gain * r;
        parts[part + ((j / (2 * BLOCK)) | 0)] += r * m;
        const u = e * scale;
        const one = 1 - u * u;
        residual[p] = e;
        if (!(one > 0)) {
          closeness[p] = 0;
          continue;
        }
        closeness[p] = one;
        const w = one * one;
        const wx = w * x;
        const wxx = wx * x;
        s0 += w;
        s1 += wx;
        s2 += wxx;
        s3 += wxx * x;
        s4 += wxx * x * x;
        e0 += w * e;
        e1 += wx * e;
        e2 += wxx * e;
        const gx = gradientX[p];
        x0 += w * gx;
        x1 += wx * gx;
        x2 += wxx * gx;
        const gy = gradientY[p];
        y0 += w * gy;
        y1 += wx * gy;
        y2 += wxx * gy;
      }
      setRow(fit.weights, i, s0, s1, s2, s3, s4);
      setMoments(this.values, i, e0, e1, e2);
      setMoments(valuesX, i, x0, x1, x2);
      setMoments(valuesY, i, y0, y1, y2);
    }
    fit.solve(this.values, ofResidual);
    fit.solve(valuesX, this.ofX);
    fit.solve(valuesY, this.ofY);
    let sum = 0;
    let square = 0;
    for (const c of parts) {
      sum += c;
      square += c * c;
    }
    this.features = square > 0 ? (sum * sum) / square : 0;
  }

  /** What `stationaryCovariance` needs, of the pixels within a window of the overlap, in new arrays. */
  parts(window: Span): ScoreParts {
    const { cols, fit, ofResidual, ofX, ofY } = this;
    const { residual, closeness } = this.buffers;
    const { x: gradientX, y: gradientY } = this.reference.gradient;
    const width = window.col1 - window.col0;
    const n = (window.row1 - window.row0) * width;
    const e = new Float64Array(n);
    const usable = new Float64Array(n);
    const ux = new Float64Array(n);
    const uy = new Float64Array(n);
    let q = 0;
    for (let i = window.row0; i < window.row1; i++) {
      let p = i * cols + window.col0;
      for (let j = window.col0; j < window.col1; j++, p++, q++) {
        const one = closeness[p];
        if (one === 0) continue;
        const x = fit.xi[j];
        usable[q] = 1;
        e[q] = one * one * (residual[p] - ofResidual.offset[i] - x * (ofResidual.tilt[i] + ofResidual.bow * x));
        ux[q] = gradientX[p] - ofX.offset[i] - x * (ofX.tilt[i] + ofX.bow * x);
        uy[q] = gradientY[p] - ofY.offset[i] - x * (ofY.tilt[i] + ofY.bow * x);
      }
    }
    return { rows: window.row1 - window.row0, cols: width, residual: e, usable, ux, uy, rowPixels: this.rowPixels() };
  }

  /** The rows and columns of the reference that the overlap spans. */
  get overlap(): Span {
    return this.span;
  }

  /** Mean number of pixels of a row over which its offset was taken. */
  private rowPixels(): number {
    let seen = 0;
    for (let i = 0; i < this.rows; i++) if (this.counts[5 * i] > 0) seen++;
    return this.pixels / Math.max(1, seen);
  }
}

function setRow(a: Float64Array, i: number, s0: number, s1: number, s2: number, s3: number, s4: number): void {
  a[5 * i] = s0;
  a[5 * i + 1] = s1;
  a[5 * i + 2] = s2;
  a[5 * i + 3] = s3;
  a[5 * i + 4] = s4;
}

function setMoments(a: Float64Array, i: number, v0: number, v1: number, v2: number): void {
  a[3 * i] = v0;
  a[3 * i + 1] = v1;
  a[3 * i + 2] = v2;
}
