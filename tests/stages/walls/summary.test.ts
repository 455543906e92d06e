import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import type { WallProfile } from "../../../src/model/walls.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { checkTip, fitWalls, missingForWidths, settings, summariseWidths } from "../../../src/stages/walls/index.js";
import { makeFrame, mean, straight } from "./made_frame.js";

const s = defaultsOf(settings);
const tip = { resolutionNm: 30, resolutionSdNm: 0 };

const profile = (over: Partial<WallProfile>): WallProfile => ({
  wall: 0,
  profile: 0,
  xNm: 0,
  yNm: 0,
  normalDeg: 0,
  arcNm: 0,
  stretchNm: 60,
  widthNm: 40,
  widthSdNm: 2,
  widthSdTipNm: 0,
  widthUpper95Nm: 44,
  resolved: true,
  apparentWidthNm: 52,
  amplitudeInsulating: 1,
  amplitudeMetallic: 2,
  reducedChi2: 1,
  pixels: 100,
  flag: "",
  ...over,
});
const limit = (nm: number, over: Partial<WallProfile> = {}): WallProfile =>
  profile({ widthNm: null, widthSdNm: null, widthSdTipNm: null, widthUpper95Nm: nm, resolved: false, ...over });

describe("the frame's median", () => {
  test("limits are limits: ten published widths give 30 nm, neither 38 (resolved alone) nor 33.5 (limits as values)", () => {
    const width = [18, 22.5, 25, 30, 31, 36, 40, 44, 52, 60];
    const isLimit = [0, 1, 1, 0, 1, 0, 0, 1, 0, 0];
    const list = width.map((w, k) =>
      isLimit[k] === 1 ? limit(w, { profile: k }) : profile({ widthNm: w, profile: k }),
    );
    const found = summariseWidths(list, tip, s, 1);
    expect(found.medianNm).toBe(30);
    expect(found.unresolvedShare).toBe(0.4);
    expect(found.profiles).toBe(10);
  });

  test("more than half limits: no median, yet counts", () => {
    const found = summariseWidths([profile({}), limit(30), limit(31)], tip, s, 1);
    expect(found.medianNm).toBeNull();
    expect(found.medianLowNm).toBeNull();
    expect(found.unresolvedShare).toBeCloseTo(2 / 3, 12);
  });

  test("flagged profiles do not count; nothing left is nothing said", () => {
    const found = summariseWidths([profile({ flag: "curved" })], tip, s, 1);
    expect(found).toEqual({
      profiles: 0,
      medianNm: null,
      medianLowNm: null,
      medianHighNm: null,
      unresolvedShare: null,
    });
  });

  test("the tip's part of the interval does not shrink with the number of profiles", () => {
    const random = makeRandom(3);
    const list = Array.from({ length: 400 }, (_, k) =>
      profile({ profile: k, widthNm: 40 + 2 * random.normal(), widthSdTipNm: 3 }),
    );
    const found = summariseWidths(list, tip, s, 1);
    const half = ((found.medianHighNm ?? Number.NaN) - (found.medianLowNm ?? Number.NaN)) / 2;
    expect(half).toBeGreaterThan(1.96 * 3);
    expect(half).toBeLessThan(1.96 * 3 + 0.1);
    const own = summariseWidths(
      list.map((p) => ({ ...p, widthSdTipNm: 0 })),
      tip,
      s,
      1,
    );
    // 1.2533·2/√400, to the accuracy of a bootstrap of one sample
    expect((own.medianHighNm ?? Number.NaN) - (own.medianLowNm ?? Number.NaN)).toBeLessThan(2 * 1.96 * 0.125 * 1.6);
  });

  test("the same seed gives the same interval", () => {
    const list = Array.from({ length: 30 }, (_, k) => profile({ profile: k, widthNm: 30 + ((k * 7) % 11) }));
    expect(summariseWidths(list, tip, s, 5)).toEqual(summariseWidths(list, tip, s, 5));
  });

  test("right with up to half limits, and its interval holds the truth in about 95 %", () => {
    for (const noise of [0.03, 0.06]) {
      const medians: number[] = [];
      let held = 0;
      let shares = 0;
      const frames = 40;
      for (let k = 0; k < frames; k++) {
        const { signal, states } = makeFrame({ distance: straight(470, 490, 137.5 * k), widthNm: 15, noise, seed: k });
        const found = summariseWidths(fitWalls(signal, states, tip, s).profiles, tip, s, k);
        shares += (found.unresolvedShare ?? Number.NaN) / frames;
        if (found.medianNm === null) continue;
        medians.push(found.medianNm);
        if ((found.medianLowNm ?? Number.NaN) <= 15 && (found.medianHighNm ?? Number.NaN) >= 15) held++;
      }
      expect(medians.length).toBeGreaterThan(30);
      if (noise === 0.06) expect(shares).toBeGreaterThan(0.2);
      // 16 profiles a frame, each with a standard deviation of 10 to 20 %
      expect(Math.abs(mean(medians) / 15 - 1)).toBeLessThan(0.05);
      expect(held / medians.length).toBeGreaterThan(0.95 - 3.5 * Math.sqrt((0.95 * 0.05) / medians.length));
    }
  });
});

describe("walls sharper than the stated tip", () => {
  const walls = (trueTipNm: number, widthNm: number): WallProfile[] => {
    const out: WallProfile[] = [];
    for (let k = 0; k < 6; k++) {
      const { signal, states } = makeFrame({
        distance: straight(480, 480, 61 * k),
        widthNm,
        tipNm: trueTipNm,
        noise: 0.04,
        seed: k,
      });
      out.push(...fitWalls(signal, states, { resolutionNm: 30, resolutionSdNm: 1 }, s).profiles);
    }
    return out;
  };
  const stated = { resolutionNm: 30, resolutionSdNm: 1 };

  test("a tip stated at 30 nm that is 22 nm is found out on sharp walls", () => {
    const notices = checkTip(walls(22, 0), stated);
    expect(notices.map((n) => n.code)).toEqual(["sharper-than-tip"]);
    expect(notices[0].message).toContain("30 nm");
  });

  test("no warning where the tip is as stated, with sharp walls or wide ones, or where no tip is stated", () => {
    expect(checkTip(walls(30, 0), stated)).toEqual([]);
    expect(checkTip(walls(30, 80), stated)).toEqual([]);
    expect(checkTip(walls(22, 0), null)).toEqual([]);
  });
});

test("what widths lack for want of a tip or of a phase is told once each, and nothing where there are both", () => {
  const told = (tip: boolean, phase: boolean): string[] =>
    missingForWidths(tip ? { resolutionNm: 30, resolutionSdNm: 1 } : null, phase).map(
      (n) => `${n.frame} ${n.code}: ${n.message}`,
    );
  expect(told(true, true)).toEqual([]);
  expect(told(false, true)).toEqual([
    expect.stringMatching(/^null no-tip: no tip\.resolution_nm: apparent widths only/),
  ]);
  expect(told(true, false)).toEqual([expect.stringMatching(/^null no-phase: .*amplitude alone.*few per cent small/)]);
  expect(told(false, false)).toHaveLength(2);
});
