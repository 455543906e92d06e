import { maskedBlur } from "../../raster/masked_blur.js";

/** Where less of the kernel than this lies on measured pixels, the mean is not enough. */
const WHOLE = 0.995;
const REACH_SIGMAS = 3.5;

/** Smoothed map of the share, NaN on unusable pixels. Away from gaps and borders a Gaussian mean; near them, where the kernel is cut
 *  off on one side and a plain mean of what is left would follow the slope, a local straight line with the same weights.
 *  Source: local linear regression, Fan & Gijbels 1996, Local Polynomial Modelling and Its Applications, ch. 2. */
export function smoothShare(
  share: Float32Array,
  usable: Uint8Array,
  rows: number,
  cols: number,
  sigmaXPx: number,
  sigmaYPx: number,
): Float32Array {
  const { values, weight } = maskedBlur(share, usable, rows, cols, sigmaXPx, sigmaYPx);
  const rx = Math.ceil(REACH_SIGMAS * sigmaXPx);
  const ry = Math.ceil(REACH_SIGMAS * sigmaYPx);
  const kx = Float64Array.from({ length: 2 * rx + 1 }, (_, k) => Math.exp(-0.5 * ((k - rx) / sigmaXPx) ** 2));
  const ky = Float64Array.from({ length: 2 * ry + 1 }, (_, k) => Math.exp(-0.5 * ((k - ry) / sigmaYPx) ** 2));
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      if (usable[p] === 0) {
        values[p] = Number.NaN;
        continue;
      }
      if (weight[p] >= WHOLE) continue;
      let [s0, sx, sy, sxx, sxy, syy, v0, vx, vy] = [0, 0, 0, 0, 0, 0, 0, 0, 0];
      for (let a = Math.max(-ry, -i); a <= Math.min(ry, rows - 1 - i); a++) {
        for (let b = Math.max(-rx, -j); b <= Math.min(rx, cols - 1 - j); b++) {
          const q = p + a * cols + b;
          if (usable[q] === 0) continue;
          const w = ky[a + ry] * kx[b + rx];
          const v = w * share[q];
          s0 += w;
          sx += w * b;
          sy += w * a;
          sxx += w * b * b;
          sxy += w * a * b;
          syy += w * a * a;
          v0 += v;
          vx += v * b;
          vy += v * a;
        }
      }
      // intercept of the weighted line: Cramer's rule
      const c00 = sxx * syy - sxy * sxy;
      const c01 = sxy * sy - sx * syy;
      const c02 = sx * sxy - sxx * sy;
      const det = s0 * c00 + sx * c01 + sy * c02;
      if (det > 1e-3 * s0 * sxx * syy) values[p] = (c00 * v0 + c01 * vx + c02 * vy) / det;
    }
  }
  return values;
}
