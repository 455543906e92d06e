import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import type { FringeTest } from "../../../src/model/walls.js";
import { FWHM_PER_SIGMA } from "../../../src/model/units.js";
import { controlFalseDiscovery, fringeShare, settings, testFringes } from "../../../src/stages/fringes/index.js";
import { SCENE, seenContrast, straightWall, type Scene } from "./straight_wall.js";

const s = { ...defaultsOf(settings), draws: 199 };
const tip = { resolutionNm: SCENE.sigmaNm * FWHM_PER_SIGMA, resolutionSdNm: 0 };
function tested(change: Partial<Scene>, seed = 5): FringeTest[] {
  const { signal, states, walls } = straightWall(change);
  return testFringes(signal, states, walls, tip, s, seed);
}
const FRINGE = { ...SCENE.fringe, rad: 0.12 };

/** p-values of many frames without a fringe. */
function nullP(frames: number, change: Partial<Scene>): number[] {
  const out: number[] = [];
  for (let k = 0; k < frames; k++) {
    const normalDeg = (k * 37) % 360;
    out.push(...tested({ normalDeg, ...change, seed: 100 + k }, k).map((t) => t.pValue));
  }
  return out;
}
const below = (p: readonly number[], level: number): number => p.filter((v) => v <= level).length / p.length;

describe("false alarms", () => {
  // Three standard deviations of a share.
  const most = (share: number, n: number): number => share + 3 * Math.sqrt((share * (1 - share)) / n);

  test.each([
    ["white noise", {}],
    ["noise correlated along the rows", { carry: 0.5 }],
    ["states that differ in phase alone", { metallic: { amplitude: 1, phase: 0.9 } }],
  ])("without a fringe p is even: %s", (_, change) => {
    const p = nullP(80, change);
    expect(p.length).toBeGreaterThanOrEqual(80);
    expect(below(p, 0.05)).toBeLessThan(most(0.05, p.length));
    expect(below(p, 0.5)).toBeLessThan(most(0.5, p.length));
    expect(below(p, 0.5)).toBeGreaterThan(1 - most(0.5, p.length));
  });

  test.each([
    ["at every angle", {}],
    ["wall along them", { normalDeg: 90 }],
  ])("rows that share an offset do not make fringes (p errs upwards: few rows tell their noise), %s", (_, change) => {
    const p = nullP(80, { rowRad: 0.02, ...change });
    for (const share of [0.05, 0.25, 0.5]) expect(below(p, share)).toBeLessThan(most(share, p.length));
    // … and do not hide them.
    const found = [1, 2, 3, 4, 5].flatMap((seed) => tested({ rowRad: 0.02, ...change, fringe: FRINGE, seed }));
    for (const t of found) expect(t.pValue).toBeLessThan(0.01);
  });

  test("a wider wall, unequal amplitudes and a wrong width of the profile make no fringe: a mixture stays on its line", () => {
    const p: number[] = [];
    for (let k = 0; k < 40; k++) {
      const { signal, states, walls } = straightWall({ wNm: 70, noise: 0.02, seed: 300 + k, normalDeg: 9 * k });
      const wrong = { ...walls, profiles: walls.profiles.map((q) => ({ ...q, apparentWidthNm: 60 })) };
      p.push(...testFringes(signal, states, wrong, tip, s, k).map((t) => t.pValue));
    }
    expect(below(p, 0.05)).toBeLessThan(most(0.05, p.length));
  });

  test("a fake wall inside one state, and a wall 60 nm from its place, find nothing where nothing is", () => {
    const p: number[] = [];
    for (let k = 0; k < 40; k++) {
      const { signal, states, walls } = straightWall({ seed: 500 + k, normalDeg: 9 * k });
      const moved = walls.walls.map((w) => ({ ...w, points: w.points.map((v, q) => v + 60 * w.normals[q]) }));
      p.push(...testFringes(signal, states, { ...walls, walls: moved }, tip, s, k).map((t) => t.pValue));
    }
    expect(below(p, 0.05)).toBeLessThan(most(0.05, p.length));
  });
});

describe("fringes that are there", () => {
  test.each(["metallic", "insulating"] as const)(
    "found on the %s side, with contrast, place, period and decay",
    (side) => {
      const fringe = { ...FRINGE, side };
      const truth = seenContrast({ ...SCENE, fringe });
      const [t] = tested({ fringe, noise: 0.02 });
      expect(t.pValue).toBeLessThan(1e-5);
      expect(t.side).toBe(side);
      expect(t.contrastRad).not.toBeNull();
      expect(Math.abs((t.contrastRad ?? 0) - truth.rad)).toBeLessThan(4 * (t.contrastSdRad ?? 0));
      expect(Math.abs((t.offsetNm ?? 0) - truth.offsetNm)).toBeLessThan(6);
      expect(Math.abs((t.periodNm ?? 0) - 160)).toBeLessThan(4 * (t.periodSdNm ?? 0));
      expect(Math.abs((t.decayNm ?? 0) - 120)).toBeLessThan(4 * (t.decaySdNm ?? 0));
      expect((t.periodSdNm ?? 99) / 160).toBeLessThan(0.03);
    },
  );

  test("mirrored, the same fringe is found on the same side at the mirrored offset", () => {
    const [a] = tested({ fringe: FRINGE, normalDeg: 20 });
    const [b] = tested({ fringe: FRINGE, normalDeg: 200 });
    expect([a.side, b.side]).toEqual(["metallic", "metallic"]);
    expect(Math.sign(a.offsetNm ?? 0)).toBe(1);
    expect(Math.abs((a.offsetNm ?? 0) - (b.offsetNm ?? 0))).toBeLessThan(10);
  });

  test.each([
    ["rows as they are", {}, 60],
    ["rows that have taken their fringe's mean for their own offset", { referencedBeyondNm: 125 }, 60],
  ])(
    "intervals of contrast, period and decay hold the truth, errors are a standard deviation: %s",
    (_, rows, frames) => {
      const truth = seenContrast({ ...SCENE, fringe: FRINGE });
      const pulls: Record<string, number[]> = { contrast: [], period: [], decay: [] };
      for (let k = 0; k < frames; k++) {
        for (const t of tested({ ...rows, fringe: FRINGE, seed: 900 + k, normalDeg: 31 * k, noise: 0.03 }, k)) {
          pulls["contrast"].push(((t.contrastRad ?? 9) - truth.rad) / (t.contrastSdRad ?? 1));
          if (t.periodNm !== null) pulls["period"].push((t.periodNm - 160) / (t.periodSdNm ?? 1));
          if (t.decayNm !== null) pulls["decay"].push((t.decayNm - 120) / (t.decaySdNm ?? 1));
        }
      }
      for (const v of Object.values(pulls)) {
        expect(v.length).toBeGreaterThan(30);
        const covered = v.filter((z) => Math.abs(z) < 1.96).length / v.length;
        expect(covered).toBeGreaterThan(0.95 - 3 * Math.sqrt((0.95 * 0.05) / v.length));
        const rms = Math.sqrt(v.reduce((a, z) => a + z * z, 0) / v.length);
        expect(rms).toBeGreaterThan(0.7);
        expect(rms).toBeLessThan(1.3);
        expect(Math.abs(v.reduce((a, z) => a + z, 0) / v.length)).toBeLessThan(0.6);
      }
    },
  );

  test("found where its contrast is three times the noise of a bin of the profile, whatever its shape", () => {
    const found: boolean[] = [];
    const shapes = [
      [80, 80],
      [160, 80],
      [160, 250],
      [240, 150],
    ];
    for (const [k, [periodNm, decayNm]] of [...shapes, ...shapes, ...shapes, ...shapes].entries()) {
      const phaseRad = 2 * Math.PI * ((0.618 * k) % 1);
      const fringe = { side: k % 2 === 0 ? "metallic" : "insulating", rad: 0.05, periodNm, decayNm, phaseRad } as const;
      // a bin of 10 nm holds the pixels of 80 rows; beyond the wall they turn across the chord by the level's own arm
      const arm = fringe.side === "metallic" ? 2.03 : 0.55;
      const noiseRad = SCENE.noise / Math.sqrt(80) / arm;
      const seen = seenContrast({ ...SCENE, fringe });
      const rad = (fringe.rad * 3 * noiseRad) / Math.abs(seen.rad);
      const tests = tested({ fringe: { ...fringe, rad }, seed: 700 + k, normalDeg: 37 * k }, k);
      found.push(...tests.map((t) => t.pValue <= 0.05));
    }
    expect(found.length).toBeGreaterThanOrEqual(16);
    expect(found.filter(Boolean).length).toBeGreaterThanOrEqual(0.9 * found.length);
  });

  test("no period where fewer than one and a half of them are in reach", () => {
    const [t] = tested({ fringe: { ...FRINGE, periodNm: 500, decayNm: 200 }, noise: 0.02 });
    expect(t.pValue).toBeLessThan(1e-5);
    expect(t.contrastRad).not.toBeNull();
    expect(t.periodNm).toBeNull();
  });
});

describe("what is not tested, and what is called", () => {
  test("no optical phase, one state, or no wall: no test", () => {
    const { signal, states, walls } = straightWall({});
    expect(testFringes({ ...signal, im: null }, states, walls, tip, s, 1)).toEqual([]);
    const one = { ...states, levels: { ...states.levels, verdict: "metallic" as const } };
    expect(testFringes(signal, one, walls, tip, s, 1)).toEqual([]);
    expect(testFringes(signal, states, { ...walls, walls: [], profiles: [] }, tip, s, 1)).toEqual([]);
  });

  test("the same seed gives the same p-values; without a tip it works too", () => {
    const { signal, states, walls } = straightWall({ fringe: FRINGE });
    expect(testFringes(signal, states, walls, null, s, 3)).toEqual(testFringes(signal, states, walls, null, s, 3));
    expect(testFringes(signal, states, walls, null, s, 3)[0].pValue).toBeLessThan(0.001);
  });

  test("the false discovery rate is held over all tests; the share counts length", () => {
    const [t] = tested({});
    const p = [0.001, 0.008, 0.039, 0.041, 0.042, 0.06, 0.074, 0.205, 0.5, 0.9];
    const decided = controlFalseDiscovery(
      p.map((pValue, k) => ({ ...t, pValue, arcFromNm: 0, arcToNm: 100 * (k + 1) })),
      s,
    );
    // m p/k: 0.01, 0.04, then 0.084 at k = 5 carried down: two are called.
    expect(decided.filter((d) => d.detected).length).toBe(2);
    expect(decided[1].adjustedP).toBeCloseTo(0.04, 12);
    expect(fringeShare(decided)).toBeCloseTo(300 / 5500, 12);
    expect(fringeShare([])).toBeNull();
  });
});
