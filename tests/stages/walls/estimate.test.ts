import { expect, test } from "vitest";
import { makeRandom } from "../../../src/numerics/random.js";
import { CorrelatedNoise } from "../../../src/stages/walls/correlation.js";
import { estimateWithoutTip, estimateWithTip, type ProfileEstimate } from "../../../src/stages/walls/estimate.js";
import { ProfileData } from "../../../src/stages/walls/profile_data.js";
import { ProfileFitter } from "../../../src/stages/walls/profile_fit.js";

const COLS = 40;
const SIGMA_NM = 12.7;

/** Pixels of noise about the insulating level, all on one side of where the wall is said to be. */
function farPixels(seed: number, nearestNm: number): ProfileData {
  const random = makeRandom(seed);
  const data = new ProfileData();
  data.reserve(12);
  data.count = 12;
  for (let k = 0; k < 12; k++) {
    data.distance[k] = -nearestNm - 30 * random.uniform();
    data.arc[k] = 40 * (random.uniform() - 0.5);
    data.value[k] = 0.55 + 0.05 * random.normal();
    data.alpha[k] = data.beta[k] = 1;
    data.weight[k] = 20;
    data.pixel[k] = Math.floor(k / 4) * COLS + (k % 4);
  }
  return data;
}

/** No number but a sound one, or none. */
function sound(e: ProfileEstimate | null): boolean {
  if (e === null) return true;
  return [e.widthSdNm, e.widthSdTipNm, e.apparentSdNm, e.upper95Nm, e.detectionNm, e.bestWidthNm]
    .filter((v) => v !== null)
    .every((v) => v >= 0 && Number.isFinite(v));
}

test.each([30, 60, 90, 150])("pixels %s nm off that never see the wall give sound numbers or none", (nearestNm) => {
  for (const lag of [0, 0.4, 0.8]) {
    const lags = lag === 0 ? [1] : [1, lag, lag * lag];
    const noise = new CorrelatedNoise(lags, lags, 10, COLS);
    for (let seed = 0; seed < 40; seed++) {
      const data = farPixels(seed, nearestNm);
      const fitter = new ProfileFitter();
      fitter.p.set([0.55, 2, 0, 0, 15, SIGMA_NM]);
      const prior = { sigmaNm: SIGMA_NM, sdNm: 0 };
      expect(sound(estimateWithTip(data, fitter, noise, prior, 15))).toBe(true);
      fitter.p.set([0.55, 2, 0, 0, 15, SIGMA_NM]);
      const without = estimateWithoutTip(data, fitter, noise, 40);
      expect(without === null || without.apparentSdNm === null || without.apparentSdNm > 0).toBe(true);
    }
  }
});
