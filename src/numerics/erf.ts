/* Error function and normal distribution in double precision.
 *
 * erf, erfc, erfcx: rational minimax forms of W. J. Cody 1969, Math. Comp. 23, 631, with the coefficients of his CALERF
 * (1990); normalQuantile: M. J. Wichura 1988, Appl. Statist. 37, 477 (AS 241). The loops are unrolled into literals:
 * these functions stand in the innermost loops of the profile fits. */

const INV_SQRT_PI = 0.5641895835477563;
const SQRT_HALF = Math.SQRT1_2;
/** √½ − SQRT_HALF: the part of √½ that a double cannot hold. */
const SQRT_HALF_LOW = -4.833646656726457e-17;
const INV_SQRT_2PI = 0.3989422804014327;

/** |x| ≤ 0.46875 */
function erfSmall(x: number): number {
  const y = x * x;
  const p =
    ((((1.85777706184603153e-1 * y + 3.1611237438705656) * y + 1.13864154151050156e2) * y + 3.77485237685302021e2) * y +
      3.20937758913846947e3) *
    x;
  const q =
    (((y + 2.36012909523441209e1) * y + 2.44024637934444173e2) * y + 1.28261652607737228e3) * y + 2.84423683343917062e3;
  return p / q;
}

/** e^{y²} erfc(y) for y ≥ 0.46875 */
function erfcxLarge(y: number): number {
  if (y <= 4) {
    const p =
      (((((((2.15311535474403846e-8 * y + 5.64188496988670089e-1) * y + 8.88314979438837594) * y +
        6.61191906371416295e1) *
        y +
        2.98635138197400131e2) *
        y +
        8.8195222124176909e2) *
        y +
        1.71204761263407058e3) *
        y +
        2.05107837782607147e3) *
        y +
      1.23033935479799725e3;
    const q =
      (((((((y + 1.57449261107098347e1) * y + 1.17693950891312499e2) * y + 5.37181101862009858e2) * y +
        1.62138957456669019e3) *
        y +
        3.29079923573345963e3) *
        y +
        4.36261909014324716e3) *
        y +
        3.43936767414372164e3) *
        y +
      1.23033935480374942e3;
    return p / q;
  }
  const z = 1 / (y * y);
  const p =
    ((((1.63153871373020978e-2 * z + 3.05326634961232344e-1) * z + 3.60344899949804439e-1) * z +
      1.25781726111229246e-1) *
      z +
      1.60837851487422766e-2) *
      z +
    6.58749161529837803e-4;
  const q =
    ((((z + 2.56852019228982242) * z + 1.87295284992346047) * z + 5.27905102951428412e-1) * z +
      6.05183413124413191e-2) *
      z +
    2.33520497626869185e-3;
  return (INV_SQRT_PI - (z * p) / q) / y;
}

/** e^{−y²} without the error that squaring a large y would bring: y is split into sixteenths and a rest. */
function expMinusSquare(y: number): number {
  const head = Math.trunc(y * 16) / 16;
  return Math.exp(-head * head) * Math.exp(-(y - head) * (y + head));
}

/** Error function 2/√π ∫₀ˣ e^{−t²} dt. */
export function erf(x: number): number {
  const y = Math.abs(x);
  if (y <= 0.46875) return erfSmall(x);
  if (y > 6) return Number.isNaN(x) ? Number.NaN : Math.sign(x);
  const tail = expMinusSquare(y) * erfcxLarge(y);
  return x > 0 ? 0.5 - tail + 0.5 : tail - 0.5 - 0.5;
}

/** Complementary error function 1 − erf(x), with full relative precision in the upper tail (to 2e-308). */
export function erfc(x: number): number {
  const y = Math.abs(x);
  if (y <= 0.46875) return 1 - erfSmall(x);
  const tail = y > 27.3 ? 0 : expMinusSquare(y) * erfcxLarge(y);
  return x > 0 ? tail : 2 - tail;
}

/** Scaled complementary error function e^{x²} erfc(x); grows without bound for x → −∞. */
export function erfcx(x: number): number {
  if (x >= 0.46875) return erfcxLarge(x);
  if (x >= -0.46875) return Math.exp(x * x) * (1 - erfSmall(x));
  return 2 / expMinusSquare(-x) - erfcxLarge(-x);
}

/** Density of the standard normal distribution. */
export function normalPdf(x: number): number {
  const head = Math.trunc(x * 16) / 16;
  return INV_SQRT_2PI * Math.exp(-0.5 * head * head) * Math.exp(-0.5 * (x - head) * (x + head));
}

/** Probability that a standard normal deviate is below x; full relative precision in the lower tail. */
export function normalCdf(x: number): number {
  const t = x * SQRT_HALF;
  if (x > -1) return 0.5 * erfc(-t);
  if (x < -38.6) return 0;
  // The rounding of x/√2 alone would cost a relative error of x² · 1e-16 in the tail: carry it along (product after Dekker 1971).
  const split = 134217729;
  const xs = x * split;
  const xh = xs - (xs - x);
  const xl = x - xh;
  const cs = SQRT_HALF * split;
  const ch = cs - (cs - SQRT_HALF);
  const cl = SQRT_HALF - ch;
  const low = xh * ch - t + xh * cl + xl * ch + xl * cl + x * SQRT_HALF_LOW;
  return 0.5 * expMinusSquare(-t) * (erfcxLarge(-t) + 2 * INV_SQRT_PI * low);
}

/** The x with normalCdf(x) = p; −∞ at 0, ∞ at 1, NaN outside. */
export function normalQuantile(p: number): number {
  if (!(p >= 0 && p <= 1)) return Number.NaN;
  if (p === 0) return -Infinity;
  if (p === 1) return Infinity;
  const q = p - 0.5;
  if (Math.abs(q) <= 0.425) {
    const r = 0.180625 - q * q;
    const num =
      ((((((2509.0809287301226727 * r + 33430.575583588128105) * r + 67265.770927008700853) * r +
        45921.953931549871457) *
        r +
        13731.693765509461125) *
        r +
        1971.5909503065514427) *
        r +
        133.14166789178437745) *
        r +
      3.387132872796366608;
    const den =
      ((((((5226.495278852854561 * r + 28729.085735721942674) * r + 39307.89580009271061) * r + 21213.794301586595867) *
        r +
        5394.1960214247511077) *
        r +
        687.1870074920579083) *
        r +
        42.313330701600911252) *
        r +
      1;
    return (q * num) / den;
  }
  let r = Math.sqrt(-Math.log(q < 0 ? p : 1 - p));
  let num: number, den: number;
  if (r <= 5) {
    r -= 1.6;
    num =
      ((((((7.7454501427834140764e-4 * r + 2.27238449892691845833e-2) * r + 2.4178072517745061177e-1) * r +
        1.27045825245236838258) *
        r +
        3.64784832476320460504) *
        r +
        5.7694972214606914055) *
        r +
        4.6303378461565452959) *
        r +
      1.42343711074968357734;
    den =
      ((((((1.05075007164441684324e-9 * r + 5.475938084995344946e-4) * r + 1.51986665636164571966e-2) * r +
        1.4810397642748007459e-1) *
        r +
        6.8976733498510000455e-1) *
        r +
        1.6763848301838038494) *
        r +
        2.05319162663775882187) *
        r +
      1;
  } else {
    r -= 5;
    num =
      ((((((2.01033439929228813265e-7 * r + 2.71155556874348757815e-5) * r + 1.2426609473880784386e-3) * r +
        2.6532189526576123093e-2) *
        r +
        2.9656057182850489123e-1) *
        r +
        1.7848265399172913358) *
        r +
        5.4637849111641143699) *
        r +
      6.6579046435011037772;
    den =
      ((((((2.04426310338993978564e-15 * r + 1.4215117583164458887e-7) * r + 1.8463183175100546818e-5) * r +
        7.868691311456132591e-4) *
        r +
        1.48753612908506148525e-2) *
        r +
        1.3692988092273580531e-1) *
        r +
        5.9983220655588793769e-1) *
        r +
      1;
  }
  return q < 0 ? -num / den : num / den;
}
