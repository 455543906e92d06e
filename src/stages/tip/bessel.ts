/** e^{−x} I_0(x) and e^{−x} I_1(x) of x ≥ 0, absolute error below 1e-10: power series below 14, Hankel's asymptotic expansion above
 *  (its smallest term there is of the order e^{−2x}). DLMF 10.25.2 and 10.40.1. */
export function besselI0e(x: number): number {
  if (x > 14) return hankel(x, 0);
  const q = 0.25 * x * x;
  let term = 1;
  let sum = 1;
  for (let k = 1; term > 1e-17 * sum; k++) {
    term *= q / (k * k);
    sum += term;
  }
  return sum * Math.exp(-x);
}

export function besselI1e(x: number): number {
  if (x > 14) return hankel(x, 4);
  const q = 0.25 * x * x;
  let term = 0.5 * x;
  let sum = term;
  for (let k = 1; term > 1e-17 * sum; k++) {
    term *= q / (k * (k + 1));
    sum += term;
  }
  return sum * Math.exp(-x);
}

/** @param mu 4ν² */
function hankel(x: number, mu: number): number {
  let term = 1;
  let sum = 1;
  for (let k = 1; k < 30; k++) {
    const next = (-term * (mu - (2 * k - 1) ** 2)) / (8 * k * x);
    if (Math.abs(next) > Math.abs(term) || Math.abs(next) < 1e-17) break;
    term = next;
    sum += term;
  }
  return sum / Math.sqrt(2 * Math.PI * x);
}
