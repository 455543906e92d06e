import { FWHM_PER_SIGMA } from "../model/units.js";
import { mergeSpec, type CooldownSpec } from "./spec.js";
import { profileTable } from "./wall_profile.js";

/** A fringe beside a straight wall through the tip's blur. */
export interface SeenFringe {
  /** Largest departure of the optical phase from that of the same wall without a fringe, signed. */
  readonly contrastRad: number;
  /** Signed distance from the wall (metallic positive) at which it is reached. */
  readonly offsetNm: number;
}

/** What the fringe of a spec looks like at one temperature, by convolving the profile with the whole of the tip's Gaussian; null where
 *  there is no fringe. */
export function fringeSeen(spec: CooldownSpec, temperatureK: number): SeenFringe | null {
  if (spec.fringe.amplitudeRad === 0) return null;
  const sigma = spec.tip.resolutionNm / FWHM_PER_SIGMA;
  const z = profileTable(spec, temperatureK, sigma);
  const bare = profileTable(mergeSpec(spec, { fringe: { amplitudeRad: 0 } }), temperatureK, sigma);
  const shift = Math.round((z.firstNm - bare.firstNm) / z.stepNm);
  let contrastRad = 0;
  let offsetNm = 0;
  for (let k = 0; k < z.re.length; k++) {
    const b = Math.max(0, Math.min(bare.re.length - 1, k + shift));
    const turn = Math.atan2(z.im[k] * bare.re[b] - z.re[k] * bare.im[b], z.re[k] * bare.re[b] + z.im[k] * bare.im[b]);
    if (Math.abs(turn) <= Math.abs(contrastRad)) continue;
    contrastRad = turn;
    offsetNm = z.firstNm + k * z.stepNm;
  }
  return { contrastRad, offsetNm };
}
