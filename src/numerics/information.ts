/* Comparing models and counting independent values. */

/** Akaike's criterion with Hurvich & Tsai's correction (1989, Biometrika 76, 297) for a least-squares fit of unknown noise:
 *  n ln(rss/n) + 2K + 2K(K + 1)/(n − K − 1), K = coefficients + 1 for the variance. Infinity where n ≤ K + 1. */
export function aicc(rss: number, n: number, coefficients: number): number {
  const k = coefficients + 1;
  return n > k + 1 ? n * Math.log(rss / n) + 2 * k + (2 * k * (k + 1)) / (n - k - 1) : Infinity;
}

/** Schwarz's criterion (1978, Ann. Stat. 6, 461) for the same: n ln(rss/n) + K ln n. */
export function bic(rss: number, n: number, coefficients: number): number {
  return n * Math.log(rss / n) + (coefficients + 1) * Math.log(n);
}

/** How many independent values tell as much about a mean as `n` of which neighbours correlate by `rho` and those k apart by ρᵏ:
 *  n/(1 + 2 Σ (1 − k/n) ρᵏ), the sum in closed form. |rho| < 1. */
export function effectiveSampleSize(n: number, rho: number): number {
  if (!(n > 0)) return 0;
  if (rho === 0) return n;
  const q = 1 - rho;
  return n / (1 + (2 * rho) / q - (2 * rho * (1 - rho ** n)) / (n * q * q));
}
