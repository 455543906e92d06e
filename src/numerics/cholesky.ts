/** Cholesky factor of a symmetric positive definite matrix, in place. `a` is row-major n × n, of which the lower triangle is
 *  read; on return the lower triangle holds L with A = LLᵀ (the upper one is left as it was). False where the matrix is not
 *  positive definite to working precision; `a` is then spoilt. */
export function choleskyInPlace(a: Float64Array, n: number): boolean {
  for (let j = 0; j < n; j++) {
    const jn = j * n;
    let d = a[jn + j];
    for (let k = 0; k < j; k++) d -= a[jn + k] * a[jn + k];
    // A pivot lost to rounding is no pivot: what is left of the diagonal must stand above the noise of the subtraction.
    if (!(d > a[jn + j] * 4e-16) || d === Infinity) return false;
    const root = Math.sqrt(d);
    a[jn + j] = root;
    const inverse = 1 / root;
    for (let i = j + 1; i < n; i++) {
      const row = i * n;
      let s = a[row + j];
      for (let k = 0; k < j; k++) s -= a[row + k] * a[jn + k];
      a[row + j] = s * inverse;
    }
  }
  return true;
}

/** Solves L Lᵀ x = b in place of `b`, L from `choleskyInPlace`. */
export function choleskySolve(l: Float64Array, n: number, b: Float64Array): void {
  for (let i = 0; i < n; i++) {
    let s = b[i];
    const row = i * n;
    for (let k = 0; k < i; k++) s -= l[row + k] * b[k];
    b[i] = s / l[row + i];
  }
  for (let i = n - 1; i >= 0; i--) {
    let s = b[i];
    for (let k = i + 1; k < n; k++) s -= l[k * n + i] * b[k];
    b[i] = s / l[i * n + i];
  }
}

/** (L Lᵀ)⁻¹ as a full symmetric row-major n × n matrix into `out`, which must not be `l`. */
export function choleskyInvert(l: Float64Array, n: number, out: Float64Array): void {
  // The columns of L⁻¹ into the rows of out, so that all sums run along rows …
  for (let j = 0; j < n; j++) {
    const column = j * n;
    out[column + j] = 1 / l[column + j];
    for (let i = j + 1; i < n; i++) {
      const row = i * n;
      let s = 0;
      for (let k = j; k < i; k++) s -= l[row + k] * out[column + k];
      out[column + i] = s / l[row + i];
    }
  }
  // … then L⁻ᵀL⁻¹ into the lower triangle. The diagonal goes last in its row: the row needs it, no later one does.
  for (let i = 0; i < n; i++) {
    const row = i * n;
    for (let j = 0; j <= i; j++) {
      const other = j * n;
      let s = 0;
      for (let k = i; k < n; k++) s += out[row + k] * out[other + k];
      out[row + j] = s;
    }
  }
  for (let i = 0; i < n; i++) for (let j = 0; j < i; j++) out[j * n + i] = out[i * n + j];
}
