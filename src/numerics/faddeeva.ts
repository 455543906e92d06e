/* Faddeeva's function w(z) = e^{−z²} erfc(−iz) by the modified trapezoid and midpoint rules of M. Al Azah & S. N. Chandler-Wilde
 * 2021, SIAM J. Numer. Anal. 59, 2346: the integral w(z) = (2iz/π) ∫₀^∞ e^{−t²}/(z² − t²) dt as a short sum, plus the residue of the
 * pole that the sum passes. Relative error some 1e-15 in the first quadrant with twelve nodes. */

const NODES = 12;
const STEP = Math.sqrt(Math.PI / NODES);
const midNode = Float64Array.from({ length: NODES }, (_, k) => ((k + 0.5) * STEP) ** 2);
const midWeight = midNode.map((t2) => Math.exp(-t2));
const trapNode = Float64Array.from({ length: NODES - 1 }, (_, k) => ((k + 1) * STEP) ** 2);
const trapWeight = trapNode.map((t2) => Math.exp(-t2));

/** w(x + iy): real part to `out[0]`, imaginary part to `out[1]`. In the lower half plane it grows as e^{y²−x²} and may overflow. */
export function faddeeva(x: number, y: number, out: Float64Array): void {
  const ax = Math.abs(x);
  const ay = Math.abs(y);
  firstQuadrant(ax, ay, out);
  // The other quadrants by w(−z*) = w(z)* and w(−z) = 2e^{−z²} − w(z).
  if (y < 0) {
    const size = 2 * Math.exp((ay - ax) * (ay + ax));
    const turn = 2 * ax * ay;
    // Now at −ax − i ay.
    out[0] = size * Math.cos(turn) - out[0];
    out[1] = -size * Math.sin(turn) - out[1];
    if (x > 0) out[1] = -out[1];
  } else if (x < 0) out[1] = -out[1];
}

function firstQuadrant(x: number, y: number, out: Float64Array): void {
  const part = x / STEP - Math.floor(x / STEP);
  const onAxisSide = y < Math.max(x, Math.PI / STEP);
  // The rule whose nodes are the farther from x.
  const trapezoid = onAxisSide && y < x && part >= 0.25 && part <= 0.75;
  const node = trapezoid ? trapNode : midNode;
  const weight = trapezoid ? trapWeight : midWeight;
  const re2 = (x - y) * (x + y);
  const im2 = 2 * x * y;
  // S = Σ e^{−t²}/(z² − t²)
  let sr = 0;
  let si = 0;
  for (let k = 0; k < node.length; k++) {
    const dr = re2 - node[k];
    const g = weight[k] / (dr * dr + im2 * im2);
    sr += g * dr;
    si -= g * im2;
  }
  // (2ih/π) z S
  const c = (2 * STEP) / Math.PI;
  let wr = -c * (x * si + y * sr);
  let wi = c * (x * sr - y * si);
  if (trapezoid) {
    // The node at 0: ih/(πz)
    const n = STEP / Math.PI / (x * x + y * y);
    wr += n * y;
    wi += n * x;
  }
  if (onAxisSide) {
    // 2e^{−z²}/(1 ± e^{−2πiz/h}), both written with the decaying exponential E = e^{2πiz/h}: ±2e^{−z²}E/(1 ± E).
    const sign = trapezoid ? -1 : 1;
    const size = Math.exp((-2 * Math.PI * y) / STEP);
    const angle = 2 * Math.PI * (part - Math.round(part));
    const er = sign * size * Math.cos(angle);
    const ei = sign * size * Math.sin(angle);
    const amplitude = 2 * Math.exp(-re2);
    const pr = amplitude * Math.cos(im2);
    const pi = -amplitude * Math.sin(im2);
    const nr = pr * er - pi * ei;
    const ni = pr * ei + pi * er;
    const d = (1 + er) * (1 + er) + ei * ei;
    wr += (nr * (1 + er) + ni * ei) / d;
    wi += (ni * (1 + er) - nr * ei) / d;
  }
  out[0] = wr;
  out[1] = wi;
}
