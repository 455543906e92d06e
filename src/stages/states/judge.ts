import type { NoiseCovariance } from "../../model/signal.js";
import type { Levels } from "./cell_levels.js";
import type { StateEvidence } from "./level_fit.js";
import { sdAlong } from "./noise.js";
import type { Pixels } from "./pixels.js";
import type { PureCells } from "./pure.js";
import type { StatesSettings } from "./settings.js";

/** One of the states at least has this share of the usable pixels far from walls: what has less has no domains, only slopes. */
const LEAST_PURE_SHARE = 0.02;

/** Whether two levels are two states: criterion, separation, contrast, domains instead of scattered pixels, and cores of pure pixels, all
 *  of them (see `fitLevels`).
 *  @returns `share1` share of the usable pixels that lie nearer to the second level along the chord */
export function judge(
  z: Pixels,
  pure: PureCells,
  levels: Levels,
  noise: readonly [NoiseCovariance, NoiseCovariance],
  deltaBic: number,
  s: StatesSettings,
): { readonly evidence: StateEvidence; readonly share1: number } {
  const [a, b] = levels;
  const contrast = Math.hypot(b.re - a.re, b.im - a.im);
  const eRe = (b.re - a.re) / contrast;
  const eIm = (b.im - a.im) / contrast;
  const larger = Math.max(Math.hypot(a.re, a.im), Math.hypot(b.re, b.im));
  const separation = contrast / Math.max(sdAlong(noise[0], eRe, eIm), sdAlong(noise[1], eRe, eIm), 1e-30);
  const { ones, pairs, ends, alike } = countNeighbours(z, eRe, eIm, 0.5 * ((a.re + b.re) * eRe + (a.im + b.im) * eIm));
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
    Math.min(pure.count[0], pure.count[1]) >= s.leastPurePixels &&
    Math.max(pure.count[0], pure.count[1]) >= LEAST_PURE_SHARE * z.count;
  return { evidence: { deltaBic, separation, clustering, twoStates }, share1: ones / z.count };
}

/** Usable pixels beyond `middle` along the chord; pairs of usable neighbours along the rows, how many of their ends lie beyond it, and how
 *  many lie beyond it with both. */
function countNeighbours(
  z: Pixels,
  eRe: number,
  eIm: number,
  middle: number,
): { readonly ones: number; readonly pairs: number; readonly ends: number; readonly alike: number } {
  let [ones, pairs, ends, alike] = [0, 0, 0, 0];
  for (let i = 0, p = 0; i < z.rows; i++) {
    let last = 255;
    for (let j = 0; j < z.cols; j++, p++) {
      if (z.usable[p] === 0) {
        last = 255;
        continue;
      }
      const k = z.re[p] * eRe + z.im[p] * eIm > middle ? 1 : 0;
      ones += k;
      if (last !== 255) {
        pairs++;
        ends += k + last;
        alike += k & last;
      }
      last = k;
    }
  }
  return { ones, pairs, ends, alike };
}
