import { SIZE_VARIANCE } from "./models.js";

/** A particle's own size averaged over instead of chosen.
 *
 *  What the pixels hold well is the variance as seen, v = σ² + c R² (c = ¼ for a disc, ⅓ for a bar); how it splits shows only in the
 *  flatness of the peak. Where that is faint the best split jumps between R = 0 and a large R, and either is wrong on average. Averaging
 *  over R ≥ 0, all sizes alike, multiplies the profile likelihood of σ by ∫₀^∞ exp(−(R² − w)²/2s²) dR, w = (v − σ²)/c and s the
 *  uncertainty of that: the room that the size has at this σ.
 *  @returns −2 ln of that factor, up to a constant, as a function of σ */
export function sizeRoom(model: "bar" | "dot", variance: number, varianceSd: number): (sigma: number) => number {
  const c = SIZE_VARIANCE[model];
  const s = varianceSd / c;
  return (sigma) => {
    const w = (variance - sigma * sigma) / c;
    // the profile has the loss at R = 0 in it already
    const already = w < 0 ? (0.5 * w * w) / (s * s) : 0;
    const far = Math.sqrt(Math.max(0, w) + 6 * s);
    const near = Math.sqrt(Math.max(0, w - 6 * s));
    const n = 60;
    let sum = 0;
    for (let k = 0; k < n; k++) {
      const r = near + ((far - near) * (k + 0.5)) / n;
      sum += Math.exp(-0.5 * ((r * r - w) / s) ** 2 + already);
    }
    return -2 * Math.log((sum * (far - near)) / n);
  };
}

/** Mean and standard deviation of the width under exp(−rise/2), and the least rise, from a grid over where it matters. */
export function averageOver(
  rise: (fwhmNm: number) => number,
  lowNm: number,
  highNm: number,
): { readonly nm: number; readonly sdNm: number; readonly least: number } {
  const n = 13;
  const from = Math.max(lowNm - 0.3 * (highNm - lowNm), 0.3 * highNm);
  const to = highNm + 0.3 * (highNm - lowNm);
  const widths = Float64Array.from({ length: n }, (_, k) => from + ((to - from) * k) / (n - 1));
  const rises = widths.map(rise);
  const least = Math.min(...rises);
  let sum = 0;
  let first = 0;
  let second = 0;
  for (let k = 0; k < n; k++) {
    const p = Math.exp(-0.5 * (rises[k] - least));
    sum += p;
    first += p * widths[k];
    second += p * widths[k] * widths[k];
  }
  const nm = first / sum;
  return { nm, sdNm: Math.sqrt(Math.max(0, second / sum - nm * nm)), least };
}

/** Variance as seen and its uncertainty from a full width at half maximum. */
export const varianceSdOf = (variance: number, width: { readonly nm: number; readonly sdNm: number }): number =>
  2 * variance * (width.sdNm / width.nm);
