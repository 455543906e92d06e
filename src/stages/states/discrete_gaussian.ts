/** Weights e^{−t} I_n(t) of a blur of variance t steps², from n = 0 to `reach`: unlike a sampled Gaussian it has that variance exactly,
 *  however small. What lies beyond `reach` is left out, and the sum made 1.
 *  Source: Lindeberg 1990, IEEE Trans. Pattern Anal. Mach. Intell. 12, 234. */
export function discreteGaussian(variance: number, reach: number): Float64Array {
  const half = variance / 2;
  const out = new Float64Array(reach + 1);
  let first = 1;
  for (let n = 0; n <= reach; n++) {
    // I_n(t) = Σ_k (t/2)^{2k+n}/(k!(k+n)!)
    if (n > 0) first *= half / n;
    let term = first;
    for (let k = 1; term > 1e-17 * out[n]; k++) {
      out[n] += term;
      term *= (half * half) / (k * (k + n));
    }
  }
  let sum = out[0];
  for (let n = 1; n <= reach; n++) sum += 2 * out[n];
  return out.map((v) => v / sum);
}
