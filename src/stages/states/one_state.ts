import { medianInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import type { ComplexValue } from "../../model/signal.js";
import type { Pixels } from "./pixels.js";
import type { PurePixels } from "./pure.js";

/** Smoothed pixels further than this many robust standard deviations from the main level may be another state, or debris. */
const OFF_SIGMAS = 4.5;

/** Pixels of the one main state of a frame: all whose smoothed signal is near the most common one. The rest (small domains of the
 *  other state with their walls, debris that was missed) has no state here.
 *  @param re, im smoothed signal */
export function mainPixels(re: Float32Array, im: Float32Array, z: Pixels, leastSd: number): PurePixels {
  const n = re.length;
  const a = new Float32Array(z.count);
  const b = new Float32Array(z.count);
  const fill = (from: (p: number) => number, to: Float32Array): number => {
    let k = 0;
    for (let p = 0; p < n; p++) if (z.usable[p] === 1) to[k++] = from(p);
    return k;
  };
  const count = fill((p) => re[p], a);
  fill((p) => im[p], b);
  const centre: ComplexValue = { re: medianInPlace(a, count), im: medianInPlace(b, count) };
  // along and across the direction of the level: gain and phase scatter differently
  const m = Math.hypot(centre.re, centre.im) || 1;
  const er = centre.re / m;
  const ei = centre.im / m;
  fill((p) => Math.abs((re[p] - centre.re) * er + (im[p] - centre.im) * ei), a);
  fill((p) => Math.abs((im[p] - centre.im) * er - (re[p] - centre.re) * ei), b);
  const along = Math.max(leastSd, SD_PER_MAD * medianInPlace(a, count));
  const across = Math.max(leastSd, SD_PER_MAD * medianInPlace(b, count));
  const state = new Uint8Array(n).fill(255);
  const share = new Float32Array(n);
  let kept = 0;
  for (let p = 0; p < n; p++) {
    if (z.usable[p] === 0) continue;
    const x = ((re[p] - centre.re) * er + (im[p] - centre.im) * ei) / along;
    const y = ((im[p] - centre.im) * er - (re[p] - centre.re) * ei) / across;
    if (x * x + y * y > OFF_SIGMAS * OFF_SIGMAS) continue;
    state[p] = 0;
    kept++;
  }
  return { state, share, count: [kept, 0], tail: [0, 0], apparentWidthNm: Number.NaN };
}
