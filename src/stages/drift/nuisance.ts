/** What is free in the difference of two frames, and so says nothing of their shift: an offset a row (line noise), and tilt and bow. Levelling takes
 *  from each frame the surface of second degree of that frame's own window, so two frames of one place differ by such a surface. With ξ along the
 *  columns and η along the rows, −1 … 1, the terms are row offset, ξ, ξ², ξη. */
export class RowSurface {
  /** The surface at (row, ξ) is offset[row] + ξ·(tilt[row] + bow·ξ). */
  readonly offset: Float64Array;
  readonly tilt: Float64Array;
  bow = 0;

  constructor(rows: number) {
    this.offset = new Float64Array(rows);
    this.tilt = new Float64Array(rows);
  }
}

/** Weighted fit of a `RowSurface` from sums along the rows alone, so that an image is read once and nothing is written. */
export class RowFit {
  /** Σw, Σwξ, Σwξ², Σwξ³, Σwξ⁴ of each row. */
  readonly weights: Float64Array;
  /** ξ of each column. */
  readonly xi: Float64Array;

  constructor(
    private readonly rows: number,
    cols: number,
  ) {
    this.weights = new Float64Array(5 * rows);
    const step = 2 / Math.max(1, cols - 1);
    this.xi = Float64Array.from({ length: cols }, (_, j) => -1 + j * step);
  }

  /** @param values Σwv, Σwξv, Σwξ²v of each row
   *  @returns Σ w v·(surface): by so much the surface lowers Σ w v² */
  solve(values: Float64Array, out: RowSurface): number {
    const { rows, weights } = this;
    const eta = (i: number): number => (2 * i) / Math.max(1, rows - 1) - 1;
    // normal equations of the three terms that are not constant along a row, row means already taken out of them
    let n11 = 0;
    let n12 = 0;
    let n13 = 0;
    let n22 = 0;
    let n23 = 0;
    let n33 = 0;
    let b1 = 0;
    let b2 = 0;
    let b3 = 0;
    for (let i = 0; i < rows; i++) {
      const s0 = weights[5 * i];
      if (s0 === 0) continue;
      const s1 = weights[5 * i + 1];
      const s2 = weights[5 * i + 2];
      const s3 = weights[5 * i + 3];
      const h = eta(i);
      const c11 = s2 - (s1 * s1) / s0;
      const c12 = s3 - (s1 * s2) / s0;
      const q1 = values[3 * i + 1] - (s1 * values[3 * i]) / s0;
      n11 += c11;
      n12 += c12;
      n13 += h * c11;
      n22 += weights[5 * i + 4] - (s2 * s2) / s0;
      n23 += h * c12;
      n33 += h * h * c11;
      b1 += q1;
      b2 += values[3 * i + 2] - (s2 * values[3 * i]) / s0;
      b3 += h * q1;
    }
    const [a1, a2, a3] = solve3(n11, n12, n13, n22, n23, n33, b1, b2, b3);
    out.bow = a2;
    let taken = 0;
    for (let i = 0; i < rows; i++) {
      const s0 = weights[5 * i];
      if (s0 === 0) continue;
      const tilt = a1 + a3 * eta(i);
      const offset = (values[3 * i] - tilt * weights[5 * i + 1] - a2 * weights[5 * i + 2]) / s0;
      out.tilt[i] = tilt;
      out.offset[i] = offset;
      taken += offset * values[3 * i] + tilt * values[3 * i + 1] + a2 * values[3 * i + 2];
    }
    return taken;
  }
}

/** Solution of a symmetric 3 × 3 system by elimination; a term that the data do not hold (too few columns, one row) is 0. */
function solve3(
  n11: number,
  n12: number,
  n13: number,
  n22: number,
  n23: number,
  n33: number,
  b1: number,
  b2: number,
  b3: number,
): [number, number, number] {
  if (!(n11 > 0)) return [0, 0, 0];
  const l21 = n12 / n11;
  const l31 = n13 / n11;
  const d22 = n22 - l21 * n12;
  const d23 = n23 - l21 * n13;
  const c2 = b2 - l21 * b1;
  const holds2 = d22 > 1e-9 * n22;
  const l32 = holds2 ? d23 / d22 : 0;
  const d33 = n33 - l31 * n13 - l32 * d23;
  const c3 = b3 - l31 * b1 - l32 * (holds2 ? c2 : 0);
  const a3 = d33 > 1e-9 * n33 ? c3 / d33 : 0;
  const a2 = holds2 ? (c2 - d23 * a3) / d22 : 0;
  return [(b1 - n12 * a2 - n13 * a3) / n11, a2, a3];
}
