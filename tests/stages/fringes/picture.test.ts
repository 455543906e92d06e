import { expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { FWHM_PER_SIGMA } from "../../../src/model/units.js";
import { settings, testFringes } from "../../../src/stages/fringes/index.js";
import { SCENE, seen, straightWall } from "./straight_wall.js";

const s = { ...defaultsOf(settings), draws: 199 };
const tip = { resolutionNm: SCENE.sigmaNm * FWHM_PER_SIGMA, resolutionSdNm: 0 };
const fringe = { ...SCENE.fringe, rad: 0.15 };

/** Smallest difference of two angles. */
const turn = (a: number): number => Math.atan2(Math.sin(a), Math.cos(a));

test("the signal drawn beside a wall is the true one within its standard deviation; null and fit go through what they should", () => {
  const truth = seen({ ...SCENE, fringe }, true);
  const plain = seen(SCENE, false);
  let sum = 0;
  let bins = 0;
  let offFit = 0;
  let offNull = 0;
  for (let seed = 1; seed <= 6; seed++) {
    const { signal, states, walls } = straightWall({ fringe, normalDeg: 31 * seed, seed });
    for (const t of testFringes(signal, states, walls, tip, s, seed)) {
      if (t.drawn === undefined) throw new Error("a tested stretch is not drawn");
      const { drawn } = t;
      expect(Math.hypot(drawn.metallic.re, drawn.metallic.im)).toBeCloseTo(2.2, 1);
      expect(drawn.bins.length % 8).toBe(0);
      expect(drawn.bins.length / 8).toBeLessThanOrEqual(80);
      for (let k = 0; k < drawn.bins.length; k += 8) {
        const [d, re, im, sd, nullRe, nullIm, fitRe, fitIm] = drawn.bins.slice(k, k + 8);
        const [tr, ti] = truth(d);
        const [pr, pi] = plain(d);
        sum += (turn(Math.atan2(im, re) - Math.atan2(ti, tr)) / sd) ** 2;
        bins++;
        offFit = Math.max(offFit, Math.abs(turn(Math.atan2(fitIm, fitRe) - Math.atan2(ti, tr))));
        offNull = Math.max(offNull, Math.abs(turn(Math.atan2(nullIm, nullRe) - Math.atan2(pi, pr))));
      }
    }
  }
  expect(bins).toBeGreaterThan(200);
  expect(sum / bins).toBeGreaterThan(0.75);
  expect(sum / bins).toBeLessThan(1.3);
  // a quarter of the fringe itself
  expect(offFit).toBeLessThan(0.04);
  expect(offNull).toBeLessThan(0.04);
});
