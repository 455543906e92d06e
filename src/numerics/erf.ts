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
    ((((0.18577770618460315 * y + 3.1611237438705655) * y + 113.86415415105016) * y + 377.485237685302) * y +
      3209.3775891384694) *
    x;
  const q = (((y + 23.601290952344122) * y + 244.02463793444417) * y + 1282.6165260773723) * y + 2844.236833439171;
  return p / q;
}

/** e^{y²} erfc(y) for y ≥ 0.46875 */
function erfcxLarge(y: number): number {
  if (y <= 4) {
    const p =
      (((((((2.1531153547440383e-8 * y + 0.5641884969886701) * y + 8.883149794388377) * y + 66.11919063714163) * y +
        298.6351381974001) *
        y +
        881.952221241769) *
        y +
        1712.0476126340707) *
        y +
        2051.0783778260716) *
        y +
      1230.3393547979972;
    const q =
      (((((((y + 15.744926110709835) * y + 117.6939508913125) * y + 537.1811018620099) * y + 1621.3895745666903) * y +
        3290.7992357334597) *
        y +
        4362.619090143247) *
        y +
        3439.3676741437216) *
        y +
      1230.3393548037495;
    return p / q;
  }
  const z = 1 / (y * y);
  const p =
    ((((0.016315387137302097 * z + 0.30532663496123236) * z + 0.36034489994980445) * z + 0.12578172611122926) * z +
      0.016083785148742275) *
      z +
    0.0006587491615298378;
  const q =
    ((((z + 2.568520192289822) * z + 1.8729528499234604) * z + 0.5279051029514285) * z + 0.06051834131244132) * z +
    0.0023352049762686918;
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
      ((((((2509.0809287301227 * r + 33430.57558358813) * r + 67265.7709270087) * r + 45921.95393154987) * r +
        13731.69376550946) *
        r +
        1971.5909503065513) *
        r +
        133.14166789178438) *
        r +
      3.3871328727963665;
    const den =
      ((((((5226.495278852854 * r + 28729.085735721943) * r + 39307.89580009271) * r + 21213.794301586597) * r +
        5394.196021424751) *
        r +
        687.1870074920579) *
        r +
        42.31333070160091) *
        r +
      1;
    return (q * num) / den;
  }
  let r = Math.sqrt(-Math.log(q < 0 ? p : 1 - p));
  let num: number, den: number;
  if (r <= 5) {
    r -= 1.6;
    num =
      ((((((0.0007745450142783414 * r + 0.022723844989269184) * r + 0.2417807251774506) * r + 1.2704582524523684) * r +
        3.6478483247632045) *
        r +
        5.769497221460691) *
        r +
        4.630337846156546) *
        r +
      1.4234371107496835;
    den =
      ((((((1.0507500716444169e-9 * r + 0.0005475938084995345) * r + 0.015198666563616457) * r + 0.14810397642748008) *
        r +
        0.6897673349851) *
        r +
        1.6763848301838038) *
        r +
        2.053191626637759) *
        r +
      1;
  } else {
    r -= 5;
    num =
      ((((((2.0103343992922881e-7 * r + 2.7115555687434876e-5) * r + 0.0012426609473880784) * r +
        0.026532189526576124) *
        r +
        0.29656057182850487) *
        r +
        1.7848265399172913) *
        r +
        5.463784911164114) *
        r +
      6.657904643501103;
    den =
      ((((((2.0442631033899397e-15 * r + 1.421511758316446e-7) * r + 1.8463183175100548e-5) * r +
        0.0007868691311456133) *
        r +
        0.014875361290850615) *
        r +
        0.1369298809227358) *
        r +
        0.599832206555888) *
        r +
      1;
  }
  return q < 0 ? -num / den : num / den;
}
