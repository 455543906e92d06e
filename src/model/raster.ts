import ndarray, { type NdArray } from "ndarray";

/** Pixel pitch: `xNm` from column to column (fast axis), `yNm` from row to row (slow axis). */
export interface PixelSize {
  readonly xNm: number;
  readonly yNm: number;
}

/** One channel of one frame. `values` has shape [rows, columns], row-major and contiguous; NaN = not measured. */
export interface Raster {
  readonly values: NdArray<Float32Array>;
  readonly pixel: PixelSize;
}

/** A raster over `data` (not copied). Throws RangeError where the length is not rows × columns. */
export function makeRaster(data: Float32Array, rows: number, cols: number, pixel: PixelSize): Raster {
  if (data.length !== rows * cols) throw new RangeError(`${data.length} values for ${rows} × ${cols} pixels`);
  return { values: ndarray(data, [rows, cols]), pixel };
}

export const rowsOf = (r: Raster): number => r.values.shape[0] as number;
export const colsOf = (r: Raster): number => r.values.shape[1] as number;
/** The row-major pixel values themselves, for hot loops. */
export const dataOf = (r: Raster): Float32Array => r.values.data;
