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
  const line = new LocalLine(share, usable, rows, cols, sigmaXPx, sigmaYPx);
  for (let i = 0, p = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, p++) {
      if (usable[p] === 0) values[p] = Number.NaN;
      else if (weight[p] < WHOLE) values[p] = line.at(i, j, values[p]);
    }
  }
  return values;
}

/** Weights of the kernel along an axis, from −reach to reach, times the distance to the power 0, 1 and 2. */
function powers(sigmaPx: number): readonly [Float64Array, Float64Array, Float64Array] {
  const reach = Math.ceil(REACH_SIGMAS * sigmaPx);
  const of = (power: number): Float64Array =>
    Float64Array.from(
      { length: 2 * reach + 1 },
      (_, k) => Math.exp(-0.5 * ((k - reach) / sigmaPx) ** 2) * (k - reach) ** power,
    );
  return [of(0), of(1), of(2)];
}

class LocalLine {
  private readonly kx: readonly [Float64Array, Float64Array, Float64Array];
  private readonly ky: readonly [Float64Array, Float64Array, Float64Array];

  constructor(
    private readonly share: Float32Array,
    private readonly usable: Uint8Array,
    private readonly rows: number,
    private readonly cols: number,
    sigmaXPx: number,
    sigmaYPx: number,
  ) {
    this.kx = powers(sigmaXPx);
    this.ky = powers(sigmaYPx);
  }

  /** Value at (i, j) of the straight line through the pixels round it; `otherwise` where they do not tell one. */
  at(i: number, j: number, otherwise: number): number {
    const { share, usable, cols } = this;
    const [x0, x1, x2] = this.kx;
    const [y0, y1, y2] = this.ky;
    const rx = (x0.length - 1) / 2;
    const ry = (y0.length - 1) / 2;
    const left = Math.max(0, j - rx);
    const right = Math.min(cols - 1, j + rx);
    let [s0, sx, sy, sxx, sxy, syy, v0, vx, vy] = [0, 0, 0, 0, 0, 0, 0, 0, 0];
    for (let row = Math.max(0, i - ry); row <= Math.min(this.rows - 1, i + ry); row++) {
      let [m0, m1, m2, n0, n1] = [0, 0, 0, 0, 0];
      for (let q = row * cols + left, k = left - j + rx; k <= right - j + rx; q++, k++) {
        if (usable[q] === 0) continue;
        const v = share[q];
        m0 += x0[k];
        m1 += x1[k];
        m2 += x2[k];
        n0 += x0[k] * v;
        n1 += x1[k] * v;
      }
      const k = row - i + ry;
      s0 += y0[k] * m0;
      sx += y0[k] * m1;
      sxx += y0[k] * m2;
      sy += y1[k] * m0;
      sxy += y1[k] * m1;
      syy += y2[k] * m0;
      v0 += y0[k] * n0;
      vx += y0[k] * n1;
      vy += y1[k] * n0;
    }
    // intercept of the weighted line: Cramer's rule
    const c00 = sxx * syy - sxy * sxy;
    const c01 = sxy * sy - sx * syy;
    const c02 = sx * sxy - sxx * sy;
    const det = s0 * c00 + sx * c01 + sy * c02;
    return det > 1e-3 * s0 * sxx * syy ? (c00 * v0 + c01 * vx + c02 * vy) / det : otherwise;
  }
}
