import { KINK_VARIANCE, kinkWithCurvature } from "./kink_exact.js";

/* The fast form. With S = √(π²w²/12 + σ²), ξ = x/S and ρ = (π²w²/12)/S² the kink is one smooth function F(ξ, ρ), from the
 * blurred step (ρ = 0) to the bare tanh (ρ = 1); it is tabulated with its derivatives and interpolated by bicubic Hermite
 * polynomials, whose own derivatives are returned: value and slope agree, as a solver wants. */

const XI_CELLS = 176;
const XI_STEP = 1 / 16;
const XI_MAX = XI_CELLS * XI_STEP;
const RHO_CELLS = 32;
const RHO_STEP = 1 / RHO_CELLS;
/** Four numbers a node: F, h_ξ ∂F/∂ξ, h_ρ ∂F/∂ρ, h_ξ h_ρ ∂²F/∂ξ∂ρ. Node (i, j) of ξ and ρ at (j·(XI_CELLS + 1) + i)·4. */
let table = new Float64Array(0);

function buildTable(): Float64Array<ArrayBuffer> {
  const rowLength = (XI_CELLS + 1) * 4;
  const built = new Float64Array(rowLength * (RHO_CELLS + 1));
  const out = new Float64Array(4);
  const margin = 3;
  // ∂F/∂ρ at ξ = −3h … beyond the end, for its sixth-order central differences; it is odd in ξ.
  const byRho = new Float64Array(XI_CELLS + 1 + 2 * margin);
  for (let j = 0; j <= RHO_CELLS; j++) {
    const rho = j * RHO_STEP;
    const w = Math.sqrt(rho / KINK_VARIANCE);
    const sigma = Math.sqrt(1 - rho);
    for (let i = 0; i <= XI_CELLS + margin; i++) {
      kinkWithCurvature(i * XI_STEP, w, sigma, out);
      // Along S = 1: d(w²)/dρ = 12/π², d(σ²)/dρ = −1, and ∂u/∂(σ²) = ½ u_xx.
      byRho[i + margin] = out[2] / KINK_VARIANCE - 0.5 * out[3];
      if (i <= margin) byRho[margin - i] = -byRho[i + margin];
      if (i > XI_CELLS) continue;
      const at = j * rowLength + i * 4;
      built[at] = out[0];
      built[at + 1] = out[1] * XI_STEP;
      built[at + 2] = byRho[i + margin] * RHO_STEP;
    }
    for (let i = 0; i <= XI_CELLS; i++) {
      const c = i + margin;
      const d1 = byRho[c + 1] - byRho[c - 1];
      const d2 = byRho[c + 2] - byRho[c - 2];
      const d3 = byRho[c + 3] - byRho[c - 3];
      built[j * rowLength + i * 4 + 3] = (0.75 * d1 - 0.15 * d2 + d3 / 60) * RHO_STEP;
    }
  }
  return built;
}

// What belongs to the last (w, σ): a fit calls with the same pair for all pixels of one evaluation. Its line through the table, at this
// ρ, is worked out node by node as the nodes are asked for; four numbers a node: F, h ∂F/∂ξ, and the slopes of both along ρ.
let lastW = Number.NaN;
let lastSigma = Number.NaN;
let perScale = 1;
let rhoOfLast = 0;
let nodeOfLast = 0;
/** Weights in ρ of F and ∂F/∂ρ at the nodes on either side, then those of the slope along ρ. */
const inRho = new Float64Array(8);
const line = new Float64Array((XI_CELLS + 1) * 4);
/** For which pair a node of the line was worked out. */
const workedOut = new Float64Array(XI_CELLS + 1);
let pair = 0;

function prepare(w: number, sigma: number): void {
  const variance = KINK_VARIANCE * w * w;
  const total = variance + sigma * sigma;
  if (!(w >= 0 && sigma >= 0 && total > 0)) throw new RangeError(`no kink of width ${w} with blur ${sigma}`);
  if (table.length === 0) table = buildTable();
  perScale = 1 / Math.sqrt(total);
  rhoOfLast = variance / total;
  const position = rhoOfLast * RHO_CELLS;
  const j = Math.min(RHO_CELLS - 1, Math.floor(position));
  const t = position - j;
  nodeOfLast = j * (XI_CELLS + 1) * 4;
  const outward = 6 * t * (1 - t) * RHO_CELLS;
  inRho[0] = (1 + 2 * t) * (1 - t) * (1 - t);
  inRho[1] = t * (1 - t) * (1 - t);
  inRho[2] = t * t * (3 - 2 * t);
  inRho[3] = t * t * (t - 1);
  inRho[4] = -outward;
  inRho[5] = (1 - t) * (1 - 3 * t) * RHO_CELLS;
  inRho[6] = outward;
  inRho[7] = t * (3 * t - 2) * RHO_CELLS;
  lastW = w;
  lastSigma = sigma;
  pair++;
}

function workOut(i: number): void {
  const f = table;
  const r = inRho;
  const a = nodeOfLast + i * 4;
  const b = a + (XI_CELLS + 1) * 4;
  const k = i * 4;
  for (let m = 0; m < 2; m++) {
    const near = f[a + m];
    const nearRho = f[a + m + 2];
    const far = f[b + m];
    const farRho = f[b + m + 2];
    line[k + m] = r[0] * near + r[1] * nearRho + r[2] * far + r[3] * farRho;
    line[k + m + 2] = r[4] * near + r[5] * nearRho + r[6] * far + r[7] * farRho;
  }
  workedOut[i] = pair;
}

/** As `kink`, from a table built at the first call (some 50 ms): u within 1e-7, derivatives within 3e-6 (units as there), all
 *  continuous but for a step of 1e-8 far out. Quick when successive calls share `w` and `sigma`; no allocation then. */
export function fastKink(x: number, w: number, sigma: number, out: Float64Array): void {
  single[0] = x;
  fastKinks(single, 1, w, sigma, out);
}

const single = new Float64Array(1);

/** `fastKink` at the first `count` positions `x`, some 15 ns each: four numbers a position into `out`. */
export function fastKinks(x: Float64Array, count: number, w: number, sigma: number, out: Float64Array): void {
  if (w !== lastW || sigma !== lastSigma) prepare(w, sigma);
  const own = pair;
  const inverse = perScale;
  const perArea = inverse * inverse;
  const varianceByRho = KINK_VARIANCE * perArea * (1 - rhoOfLast);
  const varianceByXi = -0.5 * KINK_VARIANCE * perArea;
  const sigmaByRho = -2 * sigma * perArea * rhoOfLast;
  const sigmaByXi = -sigma * perArea;
  for (let n = 0, at = 0; n < count; n++, at += 4) {
    const signed = x[n];
    const a = Math.abs(signed) * inverse;
    if (!(a < XI_MAX)) {
      out[at] = signed > 0 ? 1 : signed < 0 ? 0 : Number.NaN;
      out[at + 1] = out[at + 2] = out[at + 3] = 0;
      continue;
    }
    const position = a * (1 / XI_STEP);
    // not negative, below 2^31
    const i = position | 0;
    if (workedOut[i] !== own) workOut(i);
    if (workedOut[i + 1] !== own) workOut(i + 1);
    const t = position - i;
    const q = 1 - t;
    const k = i * 4;
    const v0 = line[k];
    const d0 = line[k + 1];
    const d1 = line[k + 5];
    const rise = line[k + 4] - v0;
    const sv0 = line[k + 2];
    const h01 = t * t * (3 - 2 * t);
    const h10 = t * q * q;
    const h11 = -t * t * q;
    const u = v0 + rise * h01 + d0 * h10 + d1 * h11;
    const byXi = (rise * 6 * t * q + d0 * q * (1 - 3 * t) + d1 * t * (3 * t - 2)) * (1 / XI_STEP);
    const byRho = sv0 + (line[k + 6] - sv0) * h01 + line[k + 3] * h10 + line[k + 7] * h11;
    const side = signed >= 0 ? 1 : -1;
    out[at] = signed >= 0 ? u : 1 - u;
    out[at + 1] = byXi * inverse;
    out[at + 2] = side * (varianceByRho * byRho + varianceByXi * a * byXi);
    out[at + 3] = side * (sigmaByRho * byRho + sigmaByXi * a * byXi);
  }
}
