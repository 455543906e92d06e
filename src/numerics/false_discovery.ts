/** Adjusted p-values that hold the false discovery rate under positive dependence: reject where adjusted ≤ q (Benjamini & Hochberg
 *  1995, J. R. Stat. Soc. B 57, 289). In the order given. RangeError for anything outside 0 … 1. */
export function benjaminiHochberg(p: ArrayLike<number>): Float64Array {
  return stepUp(p, 1);
}

/** The same under any dependence, larger by Σ 1/k (Benjamini & Yekutieli 2001, Ann. Stat. 29, 1165). */
export function benjaminiYekutieli(p: ArrayLike<number>): Float64Array {
  let harmonic = 0;
  for (let k = 1; k <= p.length; k++) harmonic += 1 / k;
  return stepUp(p, harmonic);
}

function stepUp(p: ArrayLike<number>, factor: number): Float64Array {
  const m = p.length;
  for (let i = 0; i < m; i++) if (!(p[i] >= 0 && p[i] <= 1)) throw new RangeError(`p-value ${p[i]} at index ${i}`);
  const order = Array.from({ length: m }, (_, i) => i).sort((a, b) => p[b] - p[a]);
  const adjusted = new Float64Array(m);
  let least = 1;
  for (let i = 0; i < m; i++) {
    least = Math.min(least, (factor * m * p[order[i]]) / (m - i));
    adjusted[order[i]] = least;
  }
  return adjusted;
}
