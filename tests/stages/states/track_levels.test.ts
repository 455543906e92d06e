import { describe, expect, test } from "vitest";
import type { Branch, FrameInfo } from "../../../src/model/cooldown.js";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { gainScatter } from "../../../src/stages/states/gain_course.js";
import { settings, trackLevels, type LevelFit, type StateEstimate } from "../../../src/stages/states/index.js";

const s = defaultsOf(settings);
const ROWS = 64;

interface Made {
  readonly t: number;
  /** Share of the metallic state; 0 and 1 are single-state frames. */
  readonly metallic: number;
  readonly gain?: number;
  readonly branch?: Branch;
  /** Another ratio than the sample's, as particles would make. */
  readonly ratio?: number;
  /** Measured without an optical phase. */
  readonly noPhase?: boolean;
}

const RATIO = 2.2;
const STEP = 0.6;

function estimate(amplitude: number, phase: number, share: number): StateEstimate {
  return {
    level: { re: amplitude * Math.cos(phase), im: amplitude * Math.sin(phase) },
    logSd: 0.001,
    phaseSdRad: 0.001,
    tailSd: 0,
    noise: { rr: 0.0025, ri: 0, ii: 0.0025 },
    purePixels: Math.round(1000 * share),
    share,
  };
}

function fitOf(k: number, made: Made): LevelFit {
  const g = made.gain ?? 1;
  const ratio = made.ratio ?? RATIO;
  const hasPhase = made.noPhase !== true;
  const phase = hasPhase ? 0.7 * k : 0;
  const low = estimate(g, phase, 1 - made.metallic);
  const high = estimate(ratio * g, hasPhase ? phase + STEP : 0, made.metallic);
  const both = made.metallic > 0 && made.metallic < 1;
  const [main, second] = made.metallic > 0.5 ? [high, low] : [low, high];
  return {
    frame: k,
    rows: ROWS,
    cols: ROWS,
    hasPhase,
    usablePixels: ROWS * ROWS,
    main,
    second: both ? second : null,
    evidence: { deltaBic: -1000, separation: 20, clustering: 1, twoStates: both },
    apparentWidthNm: null,
    correction: {
      logGain: new Float32Array(ROWS),
      phaseRad: new Float32Array(ROWS),
      columnLogGain: 0,
      columnPhaseRad: 0,
    },
    rowLogGainSd: new Float32Array(ROWS),
    rowWalkSd: 0,
    rowWhiteSd: 0,
    noiseCorrelationX: 0,
    noiseCorrelationY: 0,
  };
}

function infoOf(k: number, made: Made): FrameInfo {
  return {
    frame: k,
    series: made.branch === "warming" ? 1 : 0,
    branch: made.branch ?? "cooling",
    cycle: 1,
    temperatureK: made.t,
    startedAt: null,
    endedAt: null,
    stageXNm: null,
    stageYNm: null,
    rows: ROWS,
    cols: ROWS,
    sources: { amplitude: { file: "", label: "", format: "npy", page: 0, scale: 1 } },
  };
}

const track = (made: readonly Made[], change: Partial<typeof s> = {}): ReturnType<typeof trackLevels> =>
  trackLevels(
    made.map((m, k) => fitOf(k, m)),
    made.map((m, k) => infoOf(k, m)),
    { ...s, ...change },
  );
const verdicts = (made: readonly Made[]): string[] => track(made).levels.map((l) => l.verdict);
const size = (z: { re: number; im: number }): number => Math.hypot(z.re, z.im);

const COOLDOWN: Made[] = [
  { t: 190, metallic: 1, gain: 1 },
  { t: 170, metallic: 1, gain: 1.07 },
  { t: 160, metallic: 0.8, gain: 0.95 },
  { t: 155, metallic: 0.4, gain: 1.02 },
  { t: 150, metallic: 0.1, gain: 1.04 },
  { t: 140, metallic: 0, gain: 0.94 },
  { t: 120, metallic: 0, gain: 1.06 },
];

describe("levels along a cooldown", () => {
  test("single-state frames are told by their amplitude, under changes of gain", () => {
    expect(verdicts(COOLDOWN)).toEqual(["metallic", "metallic", "mixed", "mixed", "mixed", "insulating", "insulating"]);
  });
  test("frames without an optical phase among those with one keep their states, on the real axis", () => {
    const mixed = COOLDOWN.map((m, k) => ({ ...m, noPhase: k % 2 === 1 }));
    const { levels } = track(mixed);
    expect(levels.map((l) => l.verdict)).toEqual(verdicts(COOLDOWN));
    levels.forEach((l, k) => {
      const step = Math.atan2(l.metallic.im, l.metallic.re) - Math.atan2(l.insulating.im, l.insulating.re);
      expect(Math.cos(step)).toBeCloseTo(k % 2 === 1 ? 1 : Math.cos(STEP), 3);
      expect(size(l.metallic) / size(l.insulating)).toBeCloseTo(RATIO, 2);
    });
  });
  test("the absent state's level is predicted from the contrast; gains are relative to the first frame", () => {
    const { levels } = track(COOLDOWN);
    levels.forEach((l, k) => {
      const gain = COOLDOWN[k].gain ?? 1;
      expect(size(l.insulating) / gain).toBeCloseTo(1, 1);
      expect(size(l.metallic) / size(l.insulating)).toBeCloseTo(RATIO, 2);
      const step = Math.atan2(
        l.metallic.im * l.insulating.re - l.metallic.re * l.insulating.im,
        l.metallic.re * l.insulating.re + l.metallic.im * l.insulating.im,
      );
      expect(step).toBeCloseTo(STEP, 2);
    });
    expect(levels[0].gain).toBe(1);
  });
  test("a state of lower amplitude that is favoured at high temperature is metallic; the setting overrules", () => {
    const swapped = COOLDOWN.map((m) => ({ ...m, metallic: 1 - m.metallic }));
    const { levels } = track(swapped);
    expect(levels[0].verdict).toBe("metallic");
    expect(size(levels[0].metallic)).toBeLessThan(size(levels[0].insulating));
    expect(track(swapped, { metallicAmplitude: "higher" }).levels[0].verdict).toBe("insulating");
  });
  test("two levels of another contrast are not taken for the states", () => {
    const made = COOLDOWN.map((m, k) => (k === 5 ? { ...m, metallic: 0.03, ratio: 1.3 } : m));
    const { levels, notices } = track(made);
    expect(levels[5].verdict).toBe("insulating");
    expect(notices.map((n) => `${n.code} ${n.frame}`)).toContain("contrast-inconsistent 5");
  });
  test("a frame between the levels is undecided, its neighbours are not", () => {
    const made = COOLDOWN.map((m, k) => (k === 6 ? { ...m, gain: 1.5 } : m));
    const { levels, notices } = track(made);
    expect(levels[6].verdict).toBe("undecided");
    expect(levels[6].metallic.re).toBeNaN();
    expect(levels[5].verdict).toBe("insulating");
    expect(notices.map((n) => n.code)).toContain("state-undecided");
  });
});

describe("gains that change much", () => {
  test("no state is mistaken, and what amplitude cannot tell is told by its place in the series", () => {
    let wrong = 0;
    let undecided = 0;
    const random = makeRandom(3);
    for (let run = 0; run < 200; run++) {
      const made = COOLDOWN.map((m) => ({ ...m, gain: Math.exp(0.2 * random.normal()) }));
      verdicts(made).forEach((v, k) => {
        const share = made[k].metallic;
        const truth = share === 1 ? "metallic" : share === 0 ? "insulating" : "mixed";
        if (v === "undecided") undecided++;
        else if (v !== truth) wrong++;
      });
    }
    expect(wrong / 1400).toBeLessThan(0.005);
    expect(undecided / 1400).toBeLessThan(0.03);
  });
  test("their scatter is taken from the frames that show it, and stays as expected where they show less", () => {
    const scatterOf = (sd: number): number[] =>
      Array.from({ length: 60 }, (_, run) => {
        const random = makeRandom(100 + run);
        const known = Array.from({ length: 10 }, (_, k) => ({
          frame: k,
          temperatureK: 170 - 3 * k,
          value: sd * random.normal(),
          sd: 0.002,
        }));
        return gainScatter(known, 0.06, 0.15, [120, 190]);
      }).sort((a, b) => a - b);
    expect(scatterOf(0.02)[30]).toBe(0.06);
    // the process has independent and lasting parts of 0.25 and 1.5 times the scatter
    expect(scatterOf(0.2)[30]).toBeGreaterThan(0.12);
    expect(scatterOf(0.2)[30]).toBeLessThan(0.3);
    expect(gainScatter([], 0.06, 0.15, [120, 190])).toBe(0.06);
  });
});

describe("where no frame shows two states", () => {
  test("one level only: all undecided, and said so", () => {
    const { levels, notices } = track(
      [200, 190, 180, 170].map((t, k) => ({ t, metallic: 1, gain: 1 + 0.03 * (k % 2) })),
    );
    expect(levels.every((l) => l.verdict === "undecided")).toBe(true);
    expect(notices.map((n) => n.code)).toEqual(["one-state-only"]);
  });
  test("small spots that never change are particles: still undecided", () => {
    const { levels } = track([200, 190, 180, 170].map((t) => ({ t, metallic: 0.985 })));
    expect(levels.every((l) => l.verdict === "undecided")).toBe(true);
  });
  test("a jump of the amplitude at one temperature on both branches is the transition", () => {
    const half = (branch: Branch): Made[] =>
      [180, 170, 140, 130].map((t) => ({ t, metallic: t > 150 ? 1 : 0, branch }));
    expect(verdicts([...half("cooling"), ...half("warming").toReversed()])).toEqual(
      ["metallic", "metallic", "insulating", "insulating"].concat(["insulating", "insulating", "metallic", "metallic"]),
    );
  });
  test("a frame that could not be read stays undecided and harms nobody", () => {
    const infos = COOLDOWN.map((m, k) => infoOf(k, m));
    const { levels } = trackLevels(
      COOLDOWN.map((m, k) => (k === 2 ? null : fitOf(k, m))),
      infos,
      s,
    );
    expect(levels[2].verdict).toBe("undecided");
    expect(levels[0].verdict).toBe("metallic");
    expect(() => trackLevels([], infos, s)).toThrow(RangeError);
  });
});
