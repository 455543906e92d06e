import type { Grid } from "./grid.js";

/** A shift with the whole pixels that its interpolation starts from. */
export interface Offset {
  readonly dx: number;
  readonly dy: number;
  readonly jx: number;
  readonly iy: number;
}

/** How far, in pixels, a shift may lie outside the two middle samples before others take over. */
const SLACK = 0.2;

/** The offset for a shift, keeping the samples of `before` while they serve. Which pixels take part depends on the samples: near a whole-pixel shift
 *  they would otherwise change from one step to the next, and the equation with them, without end. */
export function offsetFor(dx: number, dy: number, before: Offset | null): Offset {
  const whole = (d: number, old: number | undefined): number =>
    old !== undefined && d - old > -SLACK && d - old < 1 + SLACK ? old : Math.floor(d);
  return { dx, dy, jx: whole(dx, before?.jx), iy: whole(dy, before?.iy) };
}

/** Weights at −2 … 3 for a position `t` between (or little outside) the samples 0 and 1: the polynomial through six points. Exact for quintics; on
 *  images blurred by 0.8 px and more its error in a shift stays below 1e-3 px. */
export function sixPointWeights(t: number): Float64Array {
  const w = new Float64Array(6);
  for (let a = 0; a < 6; a++) {
    let v = 1;
    for (let b = 0; b < 6; b++) if (b !== a) v *= (t - (b - 2)) / (a - b);
    w[a] = v;
  }
  return w;
}

/** Rows and columns [from, to) of the reference for which all six samples of the moving image lie inside it. */
export interface Span {
  readonly row0: number;
  readonly row1: number;
  readonly col0: number;
  readonly col1: number;
}

export function spanOf(moving: Grid, rows: number, cols: number, at: Offset): Span {
  const row0 = Math.max(0, 2 - at.iy);
  const col0 = Math.max(0, 2 - at.jx);
  return {
    row0,
    row1: Math.max(row0, Math.min(rows, moving.rows - 3 - at.iy)),
    col0,
    col1: Math.max(col0, Math.min(cols, moving.cols - 3 - at.jx)),
  };
}

/** `image` sampled at (row + dy, col + dx) for each pixel (row, col) within `span`, into `out`, a grid of `cols` columns. As the shift is the same
 *  everywhere the weights are too, and the two axes are done one after the other. Samples next to gaps mean nothing: `samplesOf` tells which. */
export function sampleShifted(image: Grid, at: Offset, span: Span, cols: number, out: Float32Array): void {
  const { row0, row1, col0, col1 } = span;
  const [x0, x1, x2, x3, x4, x5] = sixPointWeights(at.dx - at.jx);
  const [y0, y1, y2, y3, y4, y5] = sixPointWeights(at.dy - at.iy);
  const width = col1 - col0;
  const ring = Array.from({ length: 6 }, () => new Float32Array(width));
  const { values: v } = image;
  let filled = row0 + at.iy - 2;
  for (let i = row0; i < row1; i++) {
    for (; filled <= i + at.iy + 3; filled++) {
      const row = ring[filled % 6];
      let p = filled * image.cols + col0 + at.jx - 2;
      let [v0, v1, v2, v3, v4] = [v[p], v[p + 1], v[p + 2], v[p + 3], v[p + 4]];
      p += 5;
      for (let j = 0; j < width; j++, p++) {
        const v5 = v[p];
        row[j] = x0 * v0 + x1 * v1 + x2 * v2 + x3 * v3 + x4 * v4 + x5 * v5;
        v0 = v1;
        v1 = v2;
        v2 = v3;
        v3 = v4;
        v4 = v5;
      }
    }
    const top = i + at.iy - 2;
    const r0 = ring[top % 6];
    const r1 = ring[(top + 1) % 6];
    const r2 = ring[(top + 2) % 6];
    const r3 = ring[(top + 3) % 6];
    const r4 = ring[(top + 4) % 6];
    const r5 = ring[(top + 5) % 6];
    const q = i * cols + col0;
    for (let j = 0; j < width; j++) {
      out[q + j] = y0 * r0[j] + y1 * r1[j] + y2 * r2[j] + y3 * r3[j] + y4 * r4[j] + y5 * r5[j];
    }
  }
}

export interface Gradient {
  readonly x: Float32Array;
  readonly y: Float32Array;
  /** 1 where the pixels that the derivatives need are known. */
  readonly usable: Uint8Array;
}

/** An image with what registration needs of it besides; computed once, as an image takes part in many pairs, and only in the role that it has there. */
export class Sloped {
  private slopes: Gradient | null = null;
  private samplesKnown: Uint8Array | null = null;

  constructor(readonly grid: Grid) {}

  /** As a reference: derivatives along x and y (per pixel, by five points), at the pixels. */
  get gradient(): Gradient {
    this.slopes ??= gradientOf(this.grid);
    return this.slopes;
  }

  /** As a moving image: 1 where the six samples each way from −2 to 3 do for interpolation, the middle ones whole, the outer ones at least in part. Where
   *  it is 0 it is 0 over six pixels each way. */
  get samples(): Uint8Array {
    this.samplesKnown ??= samplesOf(this.grid);
    return this.samplesKnown;
  }
}

function samplesOf({ rows, cols, known }: Grid): Uint8Array {
  const along = new Uint8Array(known.length);
  for (let i = 0; i < rows; i++) {
    for (let p = i * cols + 2; p < (i + 1) * cols - 3; p++) {
      const outer = known[p - 2] !== 0 && known[p - 1] !== 0 && known[p + 2] !== 0 && known[p + 3] !== 0;
      along[p] = outer ? Math.min(known[p], known[p + 1]) : 0;
    }
  }
  const out = new Uint8Array(known.length);
  for (let p = 2 * cols; p < (rows - 3) * cols; p++) {
    if (along[p] < 2 || along[p + cols] < 2 || along[p - cols] === 0 || along[p - 2 * cols] === 0) continue;
    if (along[p + 2 * cols] !== 0 && along[p + 3 * cols] !== 0) out[p] = 1;
  }
  return out;
}

function gradientOf(image: Grid): Gradient {
  const { rows, cols, values: v, known } = image;
  const x = new Float32Array(v.length);
  const y = new Float32Array(v.length);
  const usable = new Uint8Array(v.length);
  for (let i = 2; i < rows - 2; i++) {
    for (let j = 2; j < cols - 2; j++) {
      const p = i * cols + j;
      // neighbours next to a gap will do: a gradient that is a little off costs a little precision, it does not move the shift
      if (known[p] < 2) continue;
      if (known[p - 1] === 0 || known[p + 1] === 0 || known[p - cols] === 0 || known[p + cols] === 0) continue;
      if (known[p - 2] === 0 || known[p + 2] === 0 || known[p - 2 * cols] === 0 || known[p + 2 * cols] === 0) continue;
      x[p] = (8 * (v[p + 1] - v[p - 1]) - (v[p + 2] - v[p - 2])) / 12;
      y[p] = (8 * (v[p + cols] - v[p - cols]) - (v[p + 2 * cols] - v[p - 2 * cols])) / 12;
      usable[p] = 1;
    }
  }
  return { x, y, usable };
}
