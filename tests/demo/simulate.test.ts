import { describe, expect, test } from "vitest";
import { fractionAt } from "../../src/demo/half_temperature.js";
import { sampleHeightNm } from "../../src/demo/instrument.js";
import { simulateCooldown } from "../../src/demo/simulate.js";
import { defaultSpec, type SpecOverrides } from "../../src/demo/spec.js";
import { dataOf } from "../../src/model/raster.js";

const plain = {
  rows: 48,
  cols: 56,
  gain: { frameSd: 0, rowSd: 0, rowWalkSd: 0 },
  phaseOffset: { rowSdRad: 0, rowWalkSdRad: 0, anyPhase: false },
  noise: { complex: 0, phaseRad: 0 },
  topography: { tiltNmPerUm: 0, rowSdNm: 0, rowWalkSdNm: 0, noiseNm: 0 },
  scars: { perFrame: 0 },
  unmeasured: { chance: 0 },
} as const satisfies SpecOverrides;
const oneSeries = (n: number, kelvin: number) =>
  [{ branch: "cooling", temperaturesK: Array.from({ length: n }, (_, k) => kelvin - 0.001 * k) }] as const;

function sd(values: Float32Array): number {
  let s = 0;
  let s2 = 0;
  for (const v of values) {
    s += v;
    s2 += v * v;
  }
  return Math.sqrt(s2 / values.length - (s / values.length) ** 2);
}

describe("drift", () => {
  test("pixel (i, j) shows the sample at x = j·pixel + drift x, y = i·pixel + drift y, in every channel", () => {
    const drift = {
      listNm: [
        [0, 0],
        [30, -20],
      ] as const,
    };
    const s = simulateCooldown(
      defaultSpec({ ...plain, series: [{ branch: "cooling", temperaturesK: [155, 155] }], drift }),
    );
    const a = s.frame(0);
    const b = s.frame(1);
    expect([b.truth.driftXNm, b.truth.driftYNm]).toEqual([30, -20]);
    for (const [i, j] of [
      [10, 10],
      [30, 41],
      [47, 52],
    ])
      for (const c of ["topography", "amplitude", "phase"] as const)
        // Three pixels to the right on the sample, two up: what b shows at (i, j) a shows at (i − 2, j + 3).
        expect(b[c].values.get(i, j)).toBeCloseTo(a[c].values.get(i - 2, j + 3), 5);
  });

  test("of a part of a pixel is exact: no interpolation between rendered pixels", () => {
    const base = defaultSpec(plain);
    const whole = sampleHeightNm(base, { xNm: 0, yNm: 0 }, []);
    const shifted = sampleHeightNm(base, { xNm: -3.7 + 10, yNm: 0 }, []);
    const back = sampleHeightNm({ ...base, pixel: { xNm: 3.7, yNm: 10 } }, { xNm: -3.7, yNm: 0 }, []);
    expect(back[1]).toBeCloseTo(whole[0], 12);
    expect(shifted[4]).not.toBeCloseTo(whole[5], 3);
  });

  test("starts at 0, stays within its limit, jumps now and then, and can be given as a list", () => {
    const drift = { stepSdNm: 60, jumpChance: 0.3, jumpNm: 500, limitNm: 400 };
    const { plan } = simulateCooldown(defaultSpec({ series: oneSeries(300, 190), drift }));
    expect([plan[0].driftXNm, plan[0].driftYNm]).toEqual([0, 0]);
    expect(Math.max(...plan.map((p) => Math.max(Math.abs(p.driftXNm), Math.abs(p.driftYNm))))).toBeLessThanOrEqual(400);
    expect(sd(Float32Array.from(plan, (p) => p.driftXNm))).toBeGreaterThan(150);
    expect(() => simulateCooldown(defaultSpec({ drift: { listNm: [[1, 0]] } }))).toThrow(RangeError);
    expect(() => simulateCooldown(defaultSpec({ drift: { listNm: [[0, 0]] } }))).toThrow("frame 1");
  });
});

describe("the instrument", () => {
  test("adds noise of the stated size, white or correlated, and nothing else where nothing is asked", () => {
    for (const [correlationXPx, neighbour] of [
      [0, 0],
      [1, Math.exp(-0.25)], // e^{−1/(4·1²)}
    ]) {
      const s = simulateCooldown(
        defaultSpec({
          ...plain,
          rows: 128,
          cols: 128,
          series: oneSeries(1, 300),
          debris: { perUm2: 0 },
          noise: { complex: 0.05, phaseRad: 0, correlationXPx },
          topography: { ...plain.topography, roughnessNm: 0, wavinessNm: 0, noiseNm: 0.4 },
        }),
      );
      const f = s.frame(0);
      const level = f.truth.levels.amplitudeMetallic;
      expect(sd(dataOf(f.amplitude)) / 0.05).toBeCloseTo(1, 1.2);
      expect(sd(dataOf(f.phase)) / (0.05 / level)).toBeCloseTo(1, 1.2);
      expect(sd(dataOf(f.topography)) / 0.4).toBeCloseTo(1, 1.2);
      let lag = 0;
      const z = dataOf(f.topography);
      for (let k = 1; k < z.length; k++) if (k % 128 !== 0) lag += z[k] * z[k - 1];
      expect(Math.abs(lag / (128 * 127 * 0.16) - neighbour)).toBeLessThan(0.05);
    }
  });

  test("scales frames and rows by gains, the first frame by 1 on average", () => {
    const s = simulateCooldown(
      defaultSpec({ ...plain, gain: { frameSd: 0.1, rowSd: 0.02 }, series: oneSeries(4, 300), debris: { perUm2: 0 } }),
    );
    expect(s.plan[0].gain).toBe(1);
    for (const { frame, gain } of s.plan) {
      const f = s.frame(frame);
      const level = f.truth.levels.amplitudeMetallic;
      const rows = Array.from({ length: 48 }, (_, i) => f.amplitude.values.get(i, 7) / level);
      const meanLog = rows.reduce((a, b) => a + Math.log(b), 0) / rows.length;
      expect(meanLog).toBeCloseTo(Math.log(gain), 5);
      expect(sd(Float32Array.from(rows)) / 0.02 / gain).toBeGreaterThan(0.6);
    }
  });

  test("leaves unmeasured rows out of every channel and counts its scars", () => {
    const list = [{ frame: 0, fromRow: 5, toRow: 8 }];
    const s = simulateCooldown(
      defaultSpec({ ...plain, scars: { perFrame: 3 }, series: oneSeries(2, 155), unmeasured: { list } }),
    );
    const f = s.frame(0);
    for (const c of ["topography", "amplitude", "phase"] as const)
      for (let i = 0; i < 48; i++) expect(Number.isNaN(f[c].values.get(i, 20))).toBe(i >= 5 && i < 8);
    expect(f.truth.unmeasuredPixels).toBe(3 * 56);
    expect(f.truth.scars).toBe(3);
    expect(s.frame(1).truth.unmeasuredPixels).toBe(0);
  });

  test("shows a particle in all channels, at its place on the sample, whatever the drift", () => {
    const dot = { radiusNm: 30, lengthNm: 0, angleDeg: 0, heightNm: 20, amplitudeFactor: 0.4, phaseShiftRad: 0.3 };
    const s = simulateCooldown(
      defaultSpec({
        ...plain,
        series: oneSeries(2, 300),
        debris: { list: [{ ...dot, xNm: 250, yNm: 200 }] },
        topography: { ...plain.topography, roughnessNm: 0, wavinessNm: 0 },
        drift: {
          listNm: [
            [0, 0],
            [50, 30],
          ],
        },
      }),
    );
    for (const [k, i, j] of [
      [0, 20, 25],
      [1, 17, 20],
    ]) {
      const f = s.frame(k);
      const bare = f.truth.levels;
      expect(f.topography.values.get(i, j)).toBeCloseTo(20, 4);
      expect(f.topography.values.get(i, j + 3)).toBeCloseTo(10, 4);
      // The tip's blur leaves 1 − e^{−R²/2σ²} = 0.94 of a disc's contrast in its middle.
      expect(f.amplitude.values.get(i, j) / bare.amplitudeMetallic).toBeCloseTo(1 - 0.94 * 0.6, 1.4);
      expect(f.phase.values.get(i, j)).toBeGreaterThan(bare.phaseMetallicRad + 0.25);
      expect(f.truth.debris[i * 56 + j]).toBe(1);
      expect(f.truth.debris[i * 56 + j + 7]).toBe(0);
    }
  });
});

describe("the truth", () => {
  test("fraction, state and walls agree; the ends show one state exactly; the loop opens to the right side", () => {
    const s = simulateCooldown(defaultSpec({ rows: 80, cols: 80, seed: 5 }));
    const fraction: number[] = [];
    for (const k of [0, 4, 6, 8, 11, 12, 17, 23]) {
      const { truth } = s.frame(k);
      fraction.push(truth.metallicFraction);
      if (truth.singleState === null) {
        expect(truth.wallLengthNm).toBeGreaterThan(0);
        expect(Math.min(truth.metallicDomains, truth.insulatingDomains)).toBeGreaterThanOrEqual(0);
      } else {
        expect(truth.metallicFraction).toBe(truth.singleState === "metallic" ? 1 : 0);
        expect(truth.wallLengthNm).toBe(0);
      }
      expect(truth.states.every((state, i) => (state === 1) === truth.signedDistanceNm[i] > 0)).toBe(true);
    }
    expect([fraction[0], fraction[4], fraction[5], fraction[7]]).toEqual([1, 0, 0, 1]);
    const [cycle] = s.cycles();
    const width = cycle.widthK ?? 0;
    expect(width).toBeGreaterThan(0);
  });

  test("half temperatures are where the moving field of view is half metallic", () => {
    const spec = defaultSpec({ rows: 90, cols: 90, drift: { stepSdNm: 0, jumpChance: 0 } });
    const [cycle] = simulateCooldown(spec).cycles();
    for (const [branch, half] of [
      ["cooling", cycle.coolingHalfK],
      ["warming", cycle.warmingHalfK],
    ] as const)
      expect(fractionAt(spec, branch, 1, half ?? 0, 0, 0)).toBeCloseTo(0.5, 3);
    expect(simulateCooldown({ ...spec, series: oneSeries(3, 300) }).cycles()).toEqual([
      { cycle: 1, coolingHalfK: null, warmingHalfK: null, widthK: null },
    ]);
  });

  test("a warming series alone is a cycle of its own; a cooling series begins the next", () => {
    const series = [
      { branch: "warming", temperaturesK: [140] },
      { branch: "cooling", temperaturesK: [150] },
      { branch: "warming", temperaturesK: [160] },
      { branch: "cooling", temperaturesK: [150] },
    ] as const;
    expect(simulateCooldown(defaultSpec({ series })).plan.map((p) => p.cycle)).toEqual([1, 2, 2, 3]);
  });

  test("two cooldowns of one sample share debris and topography but not their noise", () => {
    const a = simulateCooldown(defaultSpec({ ...plain, seed: 8 })).frame(0);
    const b = simulateCooldown(defaultSpec({ ...plain, seed: 9 })).frame(0);
    expect(dataOf(b.topography)).toEqual(dataOf(a.topography));
    expect(b.truth.debris).toEqual(a.truth.debris);
    const c = simulateCooldown(defaultSpec({ ...plain, seed: 9, sampleSeed: 2 })).frame(0);
    expect(dataOf(c.topography)).not.toEqual(dataOf(a.topography));
  });

  test("a frame is the same to the bit whatever was rendered before it", () => {
    const spec = defaultSpec({ rows: 40, cols: 40, fringe: { amplitudeRad: 0.3 } });
    const first = simulateCooldown(spec);
    first.frame(2);
    const a = first.frame(6);
    const b = simulateCooldown(spec).frame(6);
    for (const c of ["topography", "amplitude", "phase"] as const) expect(dataOf(b[c])).toEqual(dataOf(a[c]));
    expect(b.truth).toEqual(a.truth);
  });

  test("domains: metallic ones join over corners, insulating ones over sides only", async () => {
    const { countDomains } = await import("../../src/demo/domain_count.js");
    const map = Uint8Array.from([1, 0, 0, /**/ 0, 1, 0, /**/ 0, 0, 1]);
    const all = new Uint8Array(9).fill(1);
    expect(countDomains(map, all, 3, 3, 1, 8, 1)).toBe(1);
    expect(countDomains(map, all, 3, 3, 1, 4, 1)).toBe(3);
    expect(countDomains(map, all, 3, 3, 0, 4, 1)).toBe(2);
    expect(countDomains(map, all, 3, 3, 0, 4, 4)).toBe(0);
  });
});
