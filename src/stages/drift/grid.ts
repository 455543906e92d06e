import { maskedBlur } from "../../raster/masked_blur.js";

/** A blurred image on its pixels, with how far each pixel is known. */
export interface Grid {
  readonly rows: number;
  readonly cols: number;
  /** 0 where `known` is 0. */
  readonly values: Float32Array;
  /** 0 = nothing; 1 = fit as a far sample of an interpolation; 2 = whole, gaps and borders are far enough. */
  readonly known: Uint8Array;
}

/** Share of the blur's kernel that must have been measured: below 0.9 a gap pulls the blurred value towards its own side. */
const WHOLE = 0.9;
const PART = 0.45;

export function blurredGrid(
  image: { readonly values: Float32Array; readonly usable: Uint8Array },
  rows: number,
  cols: number,
  sigmaXPx: number,
  sigmaYPx: number,
): Grid {
  const { values, weight } = maskedBlur(image.values, image.usable, rows, cols, sigmaXPx, sigmaYPx);
  const known = new Uint8Array(values.length);
  for (let p = 0; p < values.length; p++) {
    const w = weight[p];
    known[p] = w >= WHOLE ? 2 : w >= PART ? 1 : 0;
    if (known[p] === 0) values[p] = 0;
  }
  return { rows, cols, values, known };
}

/** Means of blocks of `factor` × `factor` pixels over those known; a block less than half known is not. The centre of block (I, J) lies at pixel
 *  factor·I + (factor − 1)/2. Rows and columns left over at the end are dropped. */
export function decimate(grid: Grid, factor: number): Grid {
  if (factor === 1) return grid;
  const rows = Math.floor(grid.rows / factor);
  const cols = Math.floor(grid.cols / factor);
  const values = new Float32Array(rows * cols);
  const known = new Uint8Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      let sum = 0;
      let n = 0;
      for (let a = 0; a < factor; a++) {
        let p = (i * factor + a) * grid.cols + j * factor;
        for (let b = 0; b < factor; b++, p++) {
          if (grid.known[p] === 0) continue;
          sum += grid.values[p];
          n++;
        }
      }
      if (2 * n < factor * factor) continue;
      values[i * cols + j] = sum / n;
      known[i * cols + j] = 2;
    }
  }
  return { rows, cols, values, known };
}
