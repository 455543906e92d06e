import { normalQuantile } from "./erf.js";

/* Gamma, χ², F and Student's t: upper tails that keep their relative precision, and quantiles. */

/** ln Γ(x) for x > 0: Stirling's series after lifting x above 12. Relative error some 1e-15 away from the zeros at 1 and 2. */
export function logGamma(x: number): number {
  if (!(x > 0)) return Number.NaN;
  let product = 1;
  let y = x;
  while (y < 12) product *= y++;
  const z = 1 / (y * y);
  const series =
    (1 / 12 + z * (-1 / 360 + z * (1 / 1260 + z * (-1 / 1680 + z * (1 / 1188 + z * (-691 / 360360 + z / 156)))))) / y;
  return (y - 0.5) * Math.log(y) - y + 0.9189385332046728 + series - Math.log(product);
}

/** Regularised incomplete gamma functions [P(a, x), Q(a, x)], P + Q = 1, a > 0, x ≥ 0: power series below a + 1, continued fraction
 *  above (Lentz's algorithm); NIST Handbook of Mathematical Functions (2010), 8.7.1 and 8.9.2. */
export function incompleteGamma(a: number, x: number): readonly [number, number] {
  if (!(a > 0 && x >= 0)) return [Number.NaN, Number.NaN];
  if (x === 0) return [0, 1];
  if (x === Infinity) return [1, 0];
  const front = Math.exp(a * Math.log(x) - x - logGamma(a));
  if (x < a + 1) {
    let term = 1 / a;
    let sum = term;
    for (let n = 1; term > sum * 1e-17 && n < 100_000; n++) {
      term *= x / (a + n);
      sum += term;
    }
    return [front * sum, 1 - front * sum];
  }
  let b = x + 1 - a;
  let c = Infinity;
  let d = 1 / b;
  let h = d;
  for (let n = 1; n < 100_000; n++) {
    const an = n * (a - n);
    b += 2;
    d = 1 / (an * d + b);
    c = b + an / c;
    h *= c * d;
    if (Math.abs(c * d - 1) < 1e-16) break;
  }
  return [1 - front * h, front * h];
}

/** Regularised incomplete beta function I_x(a, b), 0 ≤ x ≤ 1, by continued fraction (NIST Handbook 8.17.22). */
export function incompleteBeta(x: number, a: number, b: number): number {
  if (!(a > 0 && b > 0 && x >= 0 && x <= 1)) return Number.NaN;
  return betaParts(x, 1 - x, a, b);
}

/** I_x(a, b) with 1 − x given apart, so that neither end loses its digits. */
function betaParts(x: number, y: number, a: number, b: number): number {
  if (x === 0) return 0;
  if (y === 0) return 1;
  if (x > (a + 1) / (a + b + 2)) return 1 - betaParts(y, x, b, a);
  const front = Math.exp(a * Math.log(x) + b * Math.log(y) + logGamma(a + b) - logGamma(a) - logGamma(b)) / a;
  let c = 1;
  let d = 1 / (1 - ((a + b) * x) / (a + 1));
  let h = d;
  for (let m = 1; m < 100_000; m++) {
    const even = (m * (b - m) * x) / ((a + 2 * m - 1) * (a + 2 * m));
    d = 1 / (1 + even * d);
    c = 1 + even / c;
    h *= c * d;
    const odd = (-(a + m) * (a + b + m) * x) / ((a + 2 * m) * (a + 2 * m + 1));
    d = 1 / (1 + odd * d);
    c = 1 + odd / c;
    h *= c * d;
    if (Math.abs(c * d - 1) < 1e-16) break;
  }
  return front * h;
}

/** P(χ² > x) for `dof` degrees of freedom. */
export const chi2UpperTail = (x: number, dof: number): number => incompleteGamma(0.5 * dof, 0.5 * Math.max(0, x))[1];

/** The x that χ² with `dof` degrees of freedom stays below with probability p. */
export function chi2Quantile(p: number, dof: number): number {
  if (!(p >= 0 && p <= 1 && dof > 0)) return Number.NaN;
  if (p === 0) return 0;
  if (p === 1) return Infinity;
  // Wilson & Hilferty's cube (1931) as a start.
  const c = 2 / (9 * dof);
  const guess = Math.max(1e-8, dof * Math.max(0.01, 1 - c + normalQuantile(p) * Math.sqrt(c)) ** 3);
  return invert((x) => {
    const [below, above] = incompleteGamma(0.5 * dof, 0.5 * x);
    return p < 0.5 ? Math.log(below / p) : Math.log((1 - p) / above);
  }, guess);
}

/** P(F > f) for `dof1` and `dof2` degrees of freedom. */
export function fUpperTail(f: number, dof1: number, dof2: number): number {
  if (Number.isNaN(f)) return Number.NaN;
  if (f <= 0) return 1;
  const total = dof1 * f + dof2;
  return betaParts(dof2 / total, (dof1 * f) / total, 0.5 * dof2, 0.5 * dof1);
}

/** P(t > x) of Student's t with `dof` degrees of freedom. */
export function studentUpperTail(x: number, dof: number): number {
  const both = fUpperTail(x * x, 1, dof);
  return x >= 0 ? 0.5 * both : 1 - 0.5 * both;
}

/** The x that Student's t stays below with probability p. */
export function studentQuantile(p: number, dof: number): number {
  if (!(p >= 0 && p <= 1 && dof > 0)) return Number.NaN;
  if (p === 0.5) return 0;
  if (p === 0 || p === 1) return p === 0 ? -Infinity : Infinity;
  const tail = Math.min(p, 1 - p);
  const x = invert((v) => Math.log(tail / studentUpperTail(v, dof)), Math.max(1e-8, -normalQuantile(tail)));
  return p < 0.5 ? -x : x;
}

/** The positive root of a rising function, to rounding: brackets by doubling, then the secant within the bracket, halved where the
 *  secant creeps (Illinois rule). */
function invert(rising: (x: number) => number, guess: number): number {
  let low = guess;
  let high = guess;
  let atLow = rising(low);
  let atHigh = atLow;
  while (atLow > 0) {
    high = low;
    atHigh = atLow;
    low *= 0.5;
    if (low < 1e-300) return 0;
    atLow = rising(low);
  }
  while (atHigh < 0) {
    low = high;
    atLow = atHigh;
    high *= 2;
    if (high > 1e300) return Infinity;
    atHigh = rising(high);
  }
  let side = 0;
  for (let i = 0; i < 200 && high - low > 1e-15 * high; i++) {
    const span = atHigh - atLow;
    let x = span > 0 && Number.isFinite(span) ? high - (atHigh * (high - low)) / span : 0.5 * (low + high);
    if (!(x > low && x < high)) x = 0.5 * (low + high);
    if (x === low || x === high) break;
    const v = rising(x);
    if (v === 0) return x;
    if (v < 0) {
      low = x;
      atLow = v;
      if (side === -1) atHigh *= 0.5;
      side = -1;
    } else {
      high = x;
      atHigh = v;
      if (side === 1) atLow *= 0.5;
      side = 1;
    }
  }
  return 0.5 * (low + high);
}

/** Wilson's interval for a share counted as `hits` of `n` (1927, J. Am. Stat. Assoc. 22, 209), z = 1.96 for 95 %. */
export function wilsonInterval(hits: number, n: number, z = 1.959963984540054): readonly [number, number] {
  if (!(n > 0)) return [0, 1];
  const share = hits / n;
  const denominator = 1 + (z * z) / n;
  const centre = (share + (z * z) / (2 * n)) / denominator;
  const half = (z * Math.sqrt((share * (1 - share)) / n + (z * z) / (4 * n * n))) / denominator;
  return [hits === 0 ? 0 : centre - half, hits === n ? 1 : centre + half];
}
