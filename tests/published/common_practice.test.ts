import { beforeAll, describe, expect, test } from "vitest";
import { defaultSpec, demoSpecs } from "../../src/demo/index.js";
import { energyMeVFromWavelength } from "../../src/model/units.js";
import { readNotices } from "../../src/store/read.js";
import { runOnce } from "../../src/study/run.js";
import type { Score } from "../../src/study/score.js";
import { errorsOf, largest } from "../../src/study/score.js";

/* Source of every figure here: common practice of the trade. Near-field tips resolve about 30 nm, as judged on line cuts over small
 * debris; walls in such films can be hundreds of nanometres wide; the transitions lie near 150 K; images are taken near 100 meV, which
 * is 12.4 µm. That line cuts over small debris give back 30 nm is tested beside the tip stage (tests/stages/tip/simulated.test.ts). */
const COOLING_HALF_K = 147;
const WARMING_HALF_K = 153;
const WALL_NM = 240;

let score: Score;
let notices: { code: string; message: string }[] = [];
let stored: Record<string, unknown> = {};

beforeAll(async () => {
  const spec = defaultSpec({
    rows: 128,
    cols: 128,
    seed: 77,
    series: [
      { branch: "cooling", temperaturesK: [172, 152, 148, 144, 124] },
      { branch: "warming", temperaturesK: [128, 148, 152, 156, 176] },
    ],
    transition: { coolingHalfK: COOLING_HALF_K, warmingHalfK: WARMING_HALF_K },
    wall: { widthNm: WALL_NM },
    domains: { scaleNm: 330 },
    drift: { stepSdNm: 30, jumpNm: 150, limitNm: 200 },
    unmeasured: { chance: 0 },
  });
  score = await runOnce(spec, 0, [], (db) => {
    notices = readNotices(db, 1);
    stored = db.prepare<[], Record<string, unknown>>("SELECT * FROM analysis").get() ?? {};
  });
});

describe("common practice: 30 nm tips, walls of hundreds of nm, near 150 K and 100 meV", () => {
  test("is what the simulated film is like", () => {
    for (const spec of [defaultSpec(), ...demoSpecs()]) {
      expect(spec.tip.resolutionNm).toBe(30);
      for (const half of [spec.transition.coolingHalfK, spec.transition.warmingHalfK])
        expect(Math.abs(half - 150)).toBeLessThan(15);
    }
  });

  test("passes without a word of warning", () => {
    expect(notices).toEqual([]);
  });

  test("100 meV is light of 12.4 µm, and is kept with the analysis", () => {
    expect(energyMeVFromWavelength(12.398)).toBeCloseTo(100, 2);
    expect(String(stored["description_json"])).toMatch(/"photonEnergyMeV":100\b/);
    expect(stored["tip_resolution_nm"]).toBe(30);
  });

  test("walls eight times as wide as the tip are measured, within 3 %", () => {
    expect(score.medianWidth.length).toBeGreaterThanOrEqual(3);
    expect(largest(score.medianWidth)).toBeLessThan(0.03);
    expect(score.unresolved).toBe(0);
  });

  test("half temperatures near 150 K come back within half a step", () => {
    expect(score.halfK).toHaveLength(2);
    for (const error of errorsOf(score.halfK)) expect(Math.abs(error)).toBeLessThan(score.stepK / 2);
  });
});
