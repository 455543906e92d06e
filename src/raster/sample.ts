/** Weights of the four samples at −1, 0, 1, 2 for a position `t` in [0, 1) between samples 0 and 1.
 *  Source: Keys 1981, IEEE Trans. Acoust. Speech Signal Process. 29, 1153 (a = −½): exact for quadratics. */
export function cubicWeights(t: number, out: Float64Array): void {
  out[0] = t * (-0.5 + t * (1 - 0.5 * t));
  out[1] = 1 + t * t * (-2.5 + 1.5 * t);
  out[2] = t * (0.5 + t * (2 - 1.5 * t));
  out[3] = t * t * (-0.5 + 0.5 * t);
}

/** Value of an image at a position between pixels, by cubic convolution at the exact position (no grid of fractions).
 *  @param data row-major [rows, cols]; NaN = not measured
 *  @param row  position along rows in pixels; pixel (i, j) has its centre at row i, col j
 *  @returns NaN outside the pixel centres, next to the border where the four samples are not there, and where one of
 *           the samples with a weight is NaN: nothing is filled in */
export function sampleCubic(data: Float32Array, rows: number, cols: number, row: number, col: number): number {
  if (!(row >= 0 && row <= rows - 1 && col >= 0 && col <= cols - 1)) return Number.NaN;
  const i = Math.min(Math.floor(row), Math.max(rows - 2, 0));
  const j = Math.min(Math.floor(col), Math.max(cols - 2, 0));
  const ty = row - i;
  const tx = col - j;
  cubicWeights(ty, WY);
  cubicWeights(tx, WX);
  let sum = 0;
  for (let a = 0; a < 4; a++) {
    const wy = WY[a];
    if (wy === 0) continue;
    const r = i + a - 1;
    if (r < 0 || r >= rows) return Number.NaN;
    for (let b = 0; b < 4; b++) {
      const wx = WX[b];
      if (wx === 0) continue;
      const c = j + b - 1;
      if (c < 0 || c >= cols) return Number.NaN;
      sum += wy * wx * data[r * cols + c];
    }
  }
  return sum;
}

const WY = new Float64Array(4);
const WX = new Float64Array(4);
