import { expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { FWHM_PER_SIGMA, RISE_PER_W } from "../../../src/model/units.js";
import { kink } from "../../../src/numerics/kink.js";
import { fitWalls, settings } from "../../../src/stages/walls/index.js";
import { makeFrame, straight, type Recipe } from "./made_frame.js";

const s = defaultsOf(settings);
const tip = { resolutionNm: 30, resolutionSdNm: 0 };

function residuals(
  recipe: Omit<Recipe, "distance" | "seed">,
  frames: number,
): { chi2: number; bins: number; profiles: number; widest: number } {
  const found = { chi2: 0, bins: 0, profiles: 0, widest: 0 };
  const u = new Float64Array(4);
  for (let k = 0; k < frames; k++) {
    const { signal, states } = makeFrame({
      ...recipe,
      distance: straight(480 + 3 * k, 480 - 5 * k, 137.508 * k),
      seed: 900 + k,
    });
    const { profiles, bins } = fitWalls(signal, states, tip, s);
    const drawn = new Map((bins ?? []).map((b) => [`${b.wall} ${b.profile}`, b]));
    for (const p of profiles) {
      if (p.flag !== "") continue;
      const b = drawn.get(`${p.wall} ${p.profile}`);
      if (b === undefined) throw new Error("a sound profile has no bins");
      if (p.widthNm !== null) expect(b.wNm * RISE_PER_W).toBeCloseTo(p.widthNm, 9);
      expect(b.sigmaNm).toBeCloseTo(30 / FWHM_PER_SIGMA, 9);
      const n = b.bins.length / 3;
      expect(n).toBeGreaterThan(8);
      expect(n).toBeLessThanOrEqual(37);
      found.profiles++;
      for (let j = 0; j < n; j++) {
        const [d, share, sd] = b.bins.slice(3 * j, 3 * j + 3);
        if (j > 0) expect(d).toBeGreaterThan(b.bins[3 * j - 3]);
        kink(d, b.wNm, b.sigmaNm, u);
        found.chi2 += ((share - u[0]) / sd) ** 2;
        found.bins++;
        found.widest = Math.max(found.widest, Math.abs(d));
      }
    }
  }
  return found;
}

test.each([
  ["white noise", {}],
  ["noise correlated along the rows", { rhoX: 0.6 }],
])("binned pixels scatter about the fitted curve by their standard deviations: %s", (_, change) => {
  const r = residuals({ widthNm: 90, noise: 0.06, ...change }, 8);
  expect(r.profiles).toBeGreaterThan(60);
  // five parameters of each profile were fitted to the same pixels
  const expected = r.bins - 5 * r.profiles;
  expect(r.chi2 / expected).toBeGreaterThan(1 - 4 * Math.sqrt(2 / expected) - 0.05);
  expect(r.chi2 / expected).toBeLessThan(1 + 4 * Math.sqrt(2 / expected) + 0.05);
  expect(r.widest).toBeGreaterThan(100);
});
