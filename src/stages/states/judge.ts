import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import type { StateEvidence } from "./level_fit.js";
import { sdAlong } from "./noise.js";
import type { Pixels } from "./pixels.js";
import type { PurePixels } from "./pure.js";
import type { StatesSettings } from "./settings.js";

/** Whether two levels are two states: criterion, separation, contrast, domains instead of scattered pixels, and cores of pure pixels, all
 *  of them (see `fitLevels`). */
export function judge(
  z: Pixels,
  pure: PurePixels,
  levels: readonly [ComplexValue, ComplexValue],
  noise: readonly [NoiseCovariance, NoiseCovariance],
  deltaBic: number,
  eRe: number,
  eIm: number,
  s: StatesSettings,
): StateEvidence {
  const [a, b] = levels;
  const contrast = Math.hypot(b.re - a.re, b.im - a.im);
  const larger = Math.max(Math.hypot(a.re, a.im), Math.hypot(b.re, b.im));
  const separation = contrast / Math.max(sdAlong(noise[0], eRe, eIm), sdAlong(noise[1], eRe, eIm), 1e-30);
  const middle = 0.5 * ((a.re + b.re) * eRe + (a.im + b.im) * eIm);
  let [ones, pairs, ends, alike] = [0, 0, 0, 0];
  for (let i = 0; i < z.rows; i++) {
    let last = 255;
    for (let j = 0, p = i * z.cols; j < z.cols; j++, p++) {
      const k = z.usable[p] === 0 ? 255 : z.re[p] * eRe + z.im[p] * eIm > middle ? 1 : 0;
      if (k === 1) ones++;
      if (k !== 255 && last !== 255) {
        pairs++;
        ends += k + last;
        if (k === 1 && last === 1) alike++;
      }
      last = k;
    }
  }
  const minority = ones * 2 > z.count ? 0 : 1;
  // pairs of (0,0) follow from the other counts
  const alikeMinority = minority === 1 ? alike : pairs - ends + alike;
  const endsMinority = minority === 1 ? ends : 2 * pairs - ends;
  const clustering = endsMinority > 0 ? (2 * alikeMinority) / endsMinority : 0;
  const share = Math.min(ones, z.count - ones) / z.count;
  const twoStates =
    deltaBic <= s.deltaBic &&
    separation >= s.leastSeparation &&
    contrast >= s.leastContrast * larger &&
    clustering > share + 0.4 * (1 - share) &&
    Math.min(pure.count[0], pure.count[1]) >= s.leastPurePixels;
  return { deltaBic, separation, clustering, twoStates };
}
