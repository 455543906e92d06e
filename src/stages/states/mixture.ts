import { normalCdf } from "../../numerics/erf.js";

/** Density of one pure state of level a seen with Gaussian noise s. */
export function pureDensity(v: number, a: number, s: number): number {
  const t = (v - a) / s;
  return Math.exp(-0.5 * t * t) / (s * Math.sqrt(2 * Math.PI));
}

/** Density of pixels that hold both states in shares spread evenly between the levels a < b, seen with Gaussian noise s:
 *  [Φ((v − a)/s) − Φ((v − b)/s)]/(b − a).
 *  Source: partial-volume mixture, Santago & Gage 1995, IEEE Trans. Image Process. 4, 1531. */
export function partialDensity(v: number, a: number, b: number, s: number): number {
  return (normalCdf((v - a) / s) - normalCdf((v - b) / s)) / (b - a);
}

/** Counts in equal bins. */
export interface Histogram {
  readonly start: number;
  readonly step: number;
  readonly counts: Float64Array;
  readonly total: number;
}

export function histogramOf(values: Float32Array, low: number, high: number, bins: number): Histogram {
  const counts = new Float64Array(bins);
  const step = (high - low) / bins;
  let total = 0;
  for (const v of values) {
    const k = Math.floor((v - low) / step);
    if (!(k >= 0 && k < bins)) continue;
    counts[k]++;
    total++;
  }
  return { start: low, step, counts, total };
}

/** Two pure states and the walls between them, fitted to a histogram. Levels low < high. */
export interface MixtureFit {
  readonly low: number;
  readonly high: number;
  readonly sdLow: number;
  readonly sdHigh: number;
  readonly shareLow: number;
  readonly shareHigh: number;
  /** Mean log-likelihood a pixel. */
  readonly logLikelihood: number;
}

const LEAST_DENSITY = 1e-12;

/** One Gaussian: mean, standard deviation, mean log-likelihood a pixel. */
export function fitOneState(h: Histogram): { mean: number; sd: number; logLikelihood: number } {
  let sum = 0;
  let squares = 0;
  for (let k = 0; k < h.counts.length; k++) {
    const v = h.start + (k + 0.5) * h.step;
    sum += h.counts[k] * v;
    squares += h.counts[k] * v * v;
  }
  const mean = sum / h.total;
  const sd = Math.sqrt(Math.max(squares / h.total - mean * mean, h.step * h.step));
  return { mean, sd, logLikelihood: -0.5 - Math.log(sd * Math.sqrt(2 * Math.PI)) };
}

/** Where to start from two levels. */
export function startAt(low: number, high: number, leastSd: number): MixtureFit {
  const sd = Math.max(leastSd, (high - low) / 8);
  return { low, high, sdLow: sd, sdHigh: sd, shareLow: 0.4, shareHigh: 0.4, logLikelihood: -Infinity };
}

/** Expectation–maximisation for the three-part mixture. The levels move with their pure parts only:
 *  the wall part then merely keeps blurred walls from pulling them together (a two-Gaussian fit would put them inside the gap).
 *  @param leastSd standard deviations are kept above this */
export function fitMixture(h: Histogram, start: MixtureFit, leastSd: number, iterations: number): MixtureFit {
  const bins = h.counts.length;
  let { low: a, high: b, sdLow: sa, sdHigh: sb, shareLow: wa, shareHigh: wb } = start;
  let ww = 1 - wa - wb;
  let logLikelihood = -Infinity;
  for (let it = 0; it < iterations; it++) {
    let [na, nb, nw, va, vb, qa, qb, ll] = [0, 0, 0, 0, 0, 0, 0, 0];
    const s = Math.min(sa, sb);
    for (let k = 0; k < bins; k++) {
      const c = h.counts[k];
      if (c === 0) continue;
      const v = h.start + (k + 0.5) * h.step;
      const pa = wa * pureDensity(v, a, sa);
      const pb = wb * pureDensity(v, b, sb);
      const pw = ww * partialDensity(v, a, b, s);
      const sum = pa + pb + pw + LEAST_DENSITY;
      ll += c * Math.log(sum);
      const ra = (c * pa) / sum;
      const rb = (c * pb) / sum;
      na += ra;
      nb += rb;
      nw += (c * pw) / sum;
      va += ra * v;
      vb += rb * v;
      qa += ra * (v - a) * (v - a);
      qb += rb * (v - b) * (v - b);
    }
    const before = logLikelihood;
    logLikelihood = ll / h.total;
    if (na > 0) {
      sa = Math.max(leastSd, Math.sqrt(qa / na));
      a = va / na;
    }
    if (nb > 0) {
      sb = Math.max(leastSd, Math.sqrt(qb / nb));
      b = vb / nb;
    }
    const n = na + nb + nw;
    [wa, wb, ww] = [na / n, nb / n, nw / n];
    if (!(b > a + 1e-9 * Math.abs(a))) break;
    if (it > 5 && logLikelihood - before < 1e-7) break;
  }
  return { low: a, high: b, sdLow: sa, sdHigh: sb, shareLow: wa, shareHigh: wb, logLikelihood };
}
