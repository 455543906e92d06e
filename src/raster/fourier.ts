/** The smallest whole number ≥ n with no prime factor but 2, 3 and 5: a length at which the transform is fast. */
export function fastLength(n: number): number {
  for (let m = Math.max(1, Math.ceil(n)); ; m++) {
    let rest = m;
    for (const prime of [2, 3, 5]) while (rest % prime === 0) rest /= prime;
    if (rest === 1) return m;
  }
}

/** Copies a row-major image into the upper left corner of a larger one of zeros. */
export function zeroPad(
  data: ArrayLike<number>,
  rows: number,
  cols: number,
  paddedRows: number,
  paddedCols: number,
): Float64Array {
  const out = new Float64Array(paddedRows * paddedCols);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) out[i * paddedCols + j] = data[i * cols + j];
  }
  return out;
}

/** conj(a)·b of two interleaved complex spectra. Its inverse transform is Σ_x a(x) b(x + lag) at each lag, negative lags
 *  wrapped to the far end.
 *  @param out where the product goes, of the same length */
export function conjugateProduct(
  a: Float64Array,
  b: Float64Array,
  out: Float64Array = new Float64Array(a.length),
): Float64Array {
  for (let k = 0; k < a.length; k += 2) {
    const ar = a[k];
    const ai = a[k + 1];
    const br = b[k];
    const bi = b[k + 1];
    out[k] = ar * br + ai * bi;
    out[k + 1] = ar * bi - ai * br;
  }
  return out;
}
