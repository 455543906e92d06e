import { selectInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import { dft2 } from "../../raster/opencv.js";
import type { Grid } from "./grid.js";

/** Relief wider than this share of the side (tilt, bow) is taken off before correlating: it is the same at any shift. */
const WIDEST = 0.2;
/** Structure is bent smoothly to this many robust standard deviations, so that one high particle does not outvote the rest. */
const CLIP = 4;
const WHOLE = 0.98;

/** Transforms of mask and mask·value², for images with gaps. */
export interface GapSpectra {
  readonly mask: Float64Array;
  readonly square: Float64Array;
}

/** Sums of value and value² over all pixels above and left of (row, col), [rows + 1, cols + 1]. */
export interface Areas {
  readonly value: Float64Array;
  readonly square: Float64Array;
}

/** One image of the coarse step. What depends on it alone is computed once: it takes part in many pairs. */
export class CoarseImage {
  readonly rows: number;
  readonly cols: number;
  /** Known pixels. */
  readonly count: number;
  /** The structure alone in units of its spread; null where there is none. */
  private readonly structure: Float64Array | null;
  private padded = { rows: 0, cols: 0 };
  private valueT: Float64Array | null = null;
  private gapsT: GapSpectra | null = null;
  private sums: Areas | null = null;

  constructor(readonly grid: Grid) {
    this.rows = grid.rows;
    this.cols = grid.cols;
    let count = 0;
    for (const k of grid.known) if (k !== 0) count++;
    this.count = count;
    this.structure = structureOf(grid);
  }

  get hasStructure(): boolean {
    return this.structure !== null;
  }

  /** Whether nearly every pixel is known: the few others may count as pixels without structure, which changes no peak. */
  get isWhole(): boolean {
    return this.count >= WHOLE * this.rows * this.cols;
  }

  /** Transform of mask·value, zero-padded to rows × cols. */
  value(rows: number, cols: number): Float64Array {
    this.padTo(rows, cols);
    this.valueT ??= this.transform((v) => v);
    return this.valueT;
  }

  gaps(rows: number, cols: number): GapSpectra {
    this.padTo(rows, cols);
    this.gapsT ??= { mask: this.transform(() => 1), square: this.transform((v) => v * v) };
    return this.gapsT;
  }

  areas(): Areas {
    this.sums ??= areasOf(this.structure ?? new Float64Array(this.rows * this.cols), this.rows, this.cols);
    return this.sums;
  }

  private padTo(rows: number, cols: number): void {
    if (rows === this.padded.rows && cols === this.padded.cols) return;
    this.padded = { rows, cols };
    this.valueT = null;
    this.gapsT = null;
  }

  private transform(of: (value: number) => number): Float64Array {
    const { rows, cols } = this.padded;
    const out = new Float64Array(rows * cols);
    if (this.structure !== null) {
      for (let i = 0; i < this.rows; i++) {
        for (let j = 0; j < this.cols; j++) {
          const p = i * this.cols + j;
          if (this.grid.known[p] !== 0) out[i * cols + j] = of(this.structure[p]);
        }
      }
    }
    return dft2(out, rows, cols);
  }
}

function areasOf(values: Float64Array, rows: number, cols: number): Areas {
  const width = cols + 1;
  const value = new Float64Array((rows + 1) * width);
  const square = new Float64Array((rows + 1) * width);
  for (let i = 0; i < rows; i++) {
    let s = 0;
    let t = 0;
    for (let j = 0; j < cols; j++) {
      const v = values[i * cols + j];
      s += v;
      t += v * v;
      const q = (i + 1) * width + j + 1;
      value[q] = value[q - width] + s;
      square[q] = square[q - width] + t;
    }
  }
  return { value, square };
}

/** The grid without its wide relief and without row offsets, bent to ±CLIP robust standard deviations. */
function structureOf(grid: Grid): Float64Array | null {
  const { rows, cols } = grid;
  const wide = boxMean(grid, Math.round(WIDEST * cols), Math.round(WIDEST * rows));
  const out = new Float64Array(rows * cols);
  const sizes = new Float64Array(rows * cols);
  let count = 0;
  for (let i = 0; i < rows; i++) {
    let sum = 0;
    let n = 0;
    for (let p = i * cols; p < (i + 1) * cols; p++) {
      if (grid.known[p] === 0) continue;
      out[p] = grid.values[p] - wide[p];
      sum += out[p];
      n++;
    }
    for (let p = i * cols; p < (i + 1) * cols; p++) {
      if (grid.known[p] === 0) continue;
      out[p] -= sum / n;
      sizes[count++] = Math.abs(out[p]);
    }
  }
  if (count === 0) return null;
  const spread = SD_PER_MAD * selectInPlace(sizes, count >> 1, count);
  if (!(spread > 0)) return null;
  for (let p = 0; p < out.length; p++) out[p] = CLIP * Math.tanh(out[p] / (CLIP * spread));
  return out;
}

/** Mean of the known pixels in the box of ±halfX, ±halfY round each pixel, by summed areas. */
function boxMean(grid: Grid, halfX: number, halfY: number): Float64Array {
  const { rows, cols, values, known } = grid;
  const width = cols + 1;
  const sum = new Float64Array((rows + 1) * width);
  const count = new Float64Array((rows + 1) * width);
  for (let i = 0; i < rows; i++) {
    let s = 0;
    let n = 0;
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      if (known[p] > 0) {
        s += values[p];
        n++;
      }
      const q = (i + 1) * width + j + 1;
      sum[q] = sum[q - width] + s;
      count[q] = count[q - width] + n;
    }
  }
  const out = new Float64Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    const top = Math.max(0, i - halfY) * width;
    const bottom = Math.min(rows, i + halfY + 1) * width;
    for (let j = 0; j < cols; j++) {
      const left = Math.max(0, j - halfX);
      const right = Math.min(cols, j + halfX + 1);
      const n = count[bottom + right] - count[top + right] - count[bottom + left] + count[top + left];
      if (n > 0)
        out[i * cols + j] = (sum[bottom + right] - sum[top + right] - sum[bottom + left] + sum[top + left]) / n;
    }
  }
  return out;
}
