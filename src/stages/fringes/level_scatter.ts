import type { Chord } from "./chord.js";
import type { Profile } from "./profile.js";

/** By how much the optical phase of a state beside a wall differs from that of the frame (root mean square over the frame's stretches and
 *  sides, rad), from the parts of the profiles farther than `farNm` from the wall, with what noise alone would give taken off; the upper end of
 *  its one-sigma interval, as few stretches tell it badly and too small a value would let offsets pass for fringes. Never less than `leastRad`.
 *  Moment estimate of a random effect (DerSimonian & Laird 1986, Control. Clin. Trials 7, 177), about the frame's own level.
 *  Strong fringes reach that far and raise it: they can spare the power. */
export function levelScatter(
  profiles: readonly Profile[],
  chord: Chord,
  farNm: number,
  leastRad: number,
  mostRad: number,
): number {
  let excess = 0;
  let weights = 0;
  let many = 0;
  for (const profile of profiles) {
    for (const metallic of [false, true]) {
      const arm = Math.abs(metallic ? chord.alongMetallic : chord.alongInsulating);
      if (arm < 0.1 * chord.length) continue;
      const bins: number[] = [];
      for (let k = 0; k < profile.count; k++) {
        if (metallic ? profile.distanceNm[k] > farNm : profile.distanceNm[k] < -farNm) bins.push(k);
      }
      if (bins.length < 2) continue;
      const n = profile.count;
      let total = 0;
      let mean = 0;
      for (const k of bins) {
        const w = 1 / profile.covariance[k * n + k];
        total += w;
        mean += w * profile.value[k];
      }
      let variance = 0;
      for (const a of bins) {
        for (const b of bins) {
          variance += profile.covariance[a * n + b] / (profile.covariance[a * n + a] * profile.covariance[b * n + b]);
        }
      }
      const m2 = (mean / total / arm) ** 2;
      const e2 = variance / (total * arm) ** 2;
      if (!(e2 > 0)) continue;
      excess += m2 / e2 - 1;
      weights += 1 / e2;
      many++;
    }
  }
  if (many === 0) return mostRad;
  const upper = (excess + Math.sqrt(2 * many)) / weights;
  return Math.min(mostRad, Math.max(leastRad, Math.sqrt(Math.max(0, upper))));
}
