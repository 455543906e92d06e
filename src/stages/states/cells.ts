import type { PixelSize } from "../../model/raster.js";
import { discreteGaussian } from "./discrete_gaussian.js";
import type { Pixels } from "./pixels.js";
import type { Smoothing } from "./smooth_signal.js";

/** Pixels of a cell along either axis. */
export const SIDE = 2;

/** Sums of the signal over cells of SIDE × SIDE pixels, row-major; the last row and column may hold part of a cell. The smoothing that
 *  the states are looked for with leaves no structure finer than that, and there are four times fewer of them than pixels. */
export interface Cells {
  readonly rows: number;
  readonly cols: number;
  /** Size of a cell. */
  readonly pixel: PixelSize;
  /** Sums over the usable pixels. */
  readonly re: Float32Array;
  readonly im: Float32Array;
  /** Usable pixels. */
  readonly count: Uint8Array;
  readonly hasPhase: boolean;
}

/** A signal with its cells, and with the mean signal of the cells after a Gaussian blur (0 where nothing usable is near). */
export interface SeenSignal {
  readonly z: Pixels;
  readonly cells: Cells;
  readonly smoothRe: Float32Array;
  readonly smoothIm: Float32Array;
  /** One over the usable pixels under the blur; 0 where none is near. */
  readonly perWeight: Float32Array;
}

/** @param before the same pixels with another correction: what hangs on the mask alone is taken from it */
export function seeSignal(z: Pixels, by: Smoothing, before: SeenSignal | null = null): SeenSignal {
  const cells = cellsOf(z);
  const kx = kernelFor(by.xPx);
  const ky = kernelFor(by.yPx);
  const blur = (values: Float32Array): Float32Array => blurCells(values, cells.rows, cells.cols, kx, ky);
  const perWeight =
    before?.perWeight ?? blur(Float32Array.from(cells.count)).map((w) => (w > LEAST_WEIGHT ? 1 / w : 0));
  const mean = (sums: Float32Array): Float32Array => {
    const out = blur(sums);
    for (let c = 0; c < out.length; c++) out[c] *= perWeight[c];
    return out;
  };
  return { z, cells, smoothRe: mean(cells.re), smoothIm: cells.hasPhase ? mean(cells.im) : cells.im, perWeight };
}

/** Where the blur holds fewer pixels nothing is said: rounding would be divided by rounding. */
const LEAST_WEIGHT = 1e-3;

/** Sums of the pixels of each cell. */
export function cellsOf(z: Pixels): Cells {
  const rows = Math.ceil(z.rows / SIDE);
  const cols = Math.ceil(z.cols / SIDE);
  const re = new Float32Array(rows * cols);
  const im = new Float32Array(rows * cols);
  const count = new Uint8Array(rows * cols);
  for (let i = 0, p = 0; i < z.rows; i++) {
    const row = Math.floor(i / SIDE) * cols;
    for (let j = 0; j < z.cols; j++, p++) {
      if (z.usable[p] === 0) continue;
      const c = row + (j >> 1);
      re[c] += z.re[p];
      im[c] += z.im[p];
      count[c]++;
    }
  }
  const pixel = { xNm: SIDE * z.pixel.xNm, yNm: SIDE * z.pixel.yNm };
  return { rows, cols, pixel, re, im, count, hasPhase: z.hasPhase };
}

/** What the cells themselves have not blurred yet of a blur of so many pixels: a cell is a box of variance (SIDE² − 1)/12. */
const kernelFor = (sigmaPx: number): Float64Array =>
  discreteGaussian(Math.max(0, sigmaPx * sigmaPx - (SIDE * SIDE - 1) / 12) / (SIDE * SIDE), REACH);

/** Taps on one side. A blur of two pixels, the most there is, has e-4 of its weight beyond. */
const REACH = 4;

/** Convolution with a symmetric kernel along either axis, given from its middle on; outside counts as 0. */
function blurCells(values: Float32Array, rows: number, cols: number, kx: Float64Array, ky: Float64Array): Float32Array {
  const along = new Float32Array((rows + 2 * REACH) * cols);
  const line = new Float64Array(cols + 2 * REACH);
  const [x0, x1, x2, x3, x4] = kx;
  for (let i = 0; i < rows; i++) {
    const from = i * cols;
    for (let j = 0; j < cols; j++) line[j + REACH] = values[from + j];
    const to = from + REACH * cols;
    for (let j = 0; j < cols; j++) {
      along[to + j] =
        x0 * line[j + 4] +
        x1 * (line[j + 3] + line[j + 5]) +
        x2 * (line[j + 2] + line[j + 6]) +
        x3 * (line[j + 1] + line[j + 7]) +
        x4 * (line[j] + line[j + 8]);
    }
  }
  const out = new Float32Array(rows * cols);
  const [y0, y1, y2, y3, y4] = ky;
  for (let p = 0, q = REACH * cols; p < out.length; p++, q++) {
    out[p] =
      y0 * along[q] +
      y1 * (along[q - cols] + along[q + cols]) +
      y2 * (along[q - 2 * cols] + along[q + 2 * cols]) +
      y3 * (along[q - 3 * cols] + along[q + 3 * cols]) +
      y4 * (along[q - 4 * cols] + along[q + 4 * cols]);
  }
  return out;
}
