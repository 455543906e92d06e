import { blurOf } from "./opencv.js";

export interface MaskedBlur {
  /** blur(value·mask)/blur(mask); NaN where no measured pixel lies within the kernel. */
  readonly values: Float32Array;
  /** blur(mask): 1 far from gaps and borders, 0 where nothing was measured. Outside the image counts as not measured. */
  readonly weight: Float32Array;
}

/** Below this share of the kernel nothing is said: rounding would be divided by rounding. */
const LEAST_WEIGHT = 1e-4;

/** Gaussian blur that leaves missing pixels out instead of filling them in.
 *  @param data row-major [rows, cols]; values where `usable` is 0 (or NaN) are not read
 *  @param usable 1 = enters, 0 = left out; null = every pixel that is not NaN
 *  Source: normalised convolution, Knutsson & Westin 1993, Proc. IEEE CVPR, 515. */
export function maskedBlur(
  data: Float32Array,
  usable: Uint8Array | null,
  rows: number,
  cols: number,
  sigmaXPx: number,
  sigmaYPx: number,
): MaskedBlur {
  const n = rows * cols;
  if (data.length !== n) throw new RangeError(`${data.length} values for ${rows} × ${cols} pixels`);
  const enters = new Uint8Array(n);
  // the mean is taken off first: single precision then holds small structure on a large level
  let sum = 0;
  let count = 0;
  for (let p = 0; p < n; p++) {
    const v = data[p];
    if ((usable !== null && usable[p] === 0) || Number.isNaN(v)) continue;
    enters[p] = 1;
    sum += v;
    count++;
  }
  const mean = count > 0 ? sum / count : 0;
  const values = blurOf(rows, cols, sigmaXPx, sigmaYPx, "zero", (image) => {
    for (let p = 0; p < n; p++) image[p] = enters[p] === 1 ? data[p] - mean : 0;
  });
  const weight = blurOf(rows, cols, sigmaXPx, sigmaYPx, "zero", (image) => image.set(enters));
  for (let p = 0; p < n; p++) {
    const w = weight[p];
    values[p] = w > LEAST_WEIGHT ? values[p] / w + mean : Number.NaN;
  }
  return { values, weight };
}
