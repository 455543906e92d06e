import { describe, expect, test } from "vitest";
import type { CleanFrame, Drift } from "../../../src/model/signal.js";
import { makeRaster } from "../../../src/model/raster.js";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRandom } from "../../../src/numerics/random.js";
import {
  CORE,
  DebrisAccumulator,
  type DebrisMap,
  debrisInFrame,
  debrisSettings,
  findDebrisInFrame,
  MARGIN,
} from "../../../src/stages/debris/index.js";
import { distanceFromChord } from "../../../src/stages/debris/chord.js";

const settings = defaultsOf(debrisSettings);
const tip = { resolutionNm: 30, resolutionSdNm: 1 };
const SIZE = 96;
const PIXEL_NM = 10;
/** Blur of the tip in pixels. */
const SIGMA_PX = 30 / 2.35482 / PIXEL_NM;

interface Dot {
  readonly xNm: number;
  readonly yNm: number;
  readonly radiusNm: number;
  readonly heightNm: number;
  readonly logFactor: number;
  readonly turnRad: number;
}

interface Scene {
  readonly seed: number;
  readonly dots: readonly Dot[];
  /** One entry a frame: where it lies, and the metallic share at a place of the sample. */
  readonly frames: readonly {
    readonly xNm: number;
    readonly yNm: number;
    readonly share: (x: number, y: number) => number;
  }[];
  readonly noise?: number;
  readonly roughnessNm?: number;
  readonly withPhase?: boolean;
  readonly withTopography?: boolean;
}

/** Share of a dot's effect at a distance from its centre: a disc blurred by the tip, near enough. */
const profile = (distanceNm: number, radiusNm: number): number =>
  1 / (1 + Math.exp((distanceNm - radiusNm) / (0.6 * SIGMA_PX * PIXEL_NM)));

/** Frames as cleaning leaves them: two states of amplitude 1 and 2.2, 0.6 rad apart, dots on the sample, static roughness. */
function render(scene: Scene): { frames: CleanFrame[]; drifts: Drift[] } {
  const random = makeRandom(scene.seed);
  const waves = Array.from({ length: 60 }, () => {
    const k = (2 * Math.PI) / (60 + 250 * random.uniform());
    const a = 2 * Math.PI * random.uniform();
    return { kx: k * Math.cos(a), ky: k * Math.sin(a), at: 2 * Math.PI * random.uniform() };
  });
  const rough = (scene.roughnessNm ?? 1) / Math.sqrt(waves.length / 2);
  const noise = scene.noise ?? 0.05;
  const pixel = { xNm: PIXEL_NM, yNm: PIXEL_NM };
  const frames = scene.frames.map((at, frame): CleanFrame => {
    const amplitude = new Float32Array(SIZE * SIZE);
    const phase = new Float32Array(SIZE * SIZE);
    const topography = new Float32Array(SIZE * SIZE);
    for (let p = 0; p < SIZE * SIZE; p++) {
      const x = at.xNm + (p % SIZE) * PIXEL_NM;
      const y = at.yNm + Math.floor(p / SIZE) * PIXEL_NM;
      const u = at.share(x, y);
      let log = Math.log(1 + 1.2 * u);
      let turn = 0.6 * u;
      let h = 0;
      for (const w of waves) h += rough * Math.cos(w.kx * x + w.ky * y + w.at);
      for (const d of scene.dots) {
        const distance = Math.hypot(x - d.xNm, y - d.yNm);
        if (distance > 250) continue;
        const c = profile(distance, d.radiusNm);
        log += d.logFactor * c;
        turn += d.turnRad * c;
        h += d.heightNm * Math.exp(-Math.LN2 * (distance / d.radiusNm) ** 2);
      }
      const s = Math.exp(log);
      amplitude[p] = s + noise * random.normal();
      phase[p] = turn + (noise / s) * random.normal();
      topography[p] = h + 0.2 * random.normal();
    }
    return {
      frame,
      pixel,
      topography: scene.withTopography === false ? null : makeRaster(topography, SIZE, SIZE, pixel),
      amplitude: makeRaster(amplitude, SIZE, SIZE, pixel),
      phase: scene.withPhase === false ? null : makeRaster(phase, SIZE, SIZE, pixel),
    };
  });
  return {
    frames,
    drifts: scene.frames.map((f, frame) => ({ frame, xNm: f.xNm, yNm: f.yNm, sdNm: frame === 0 ? 0 : 0.5 })),
  };
}

function mapOf(scene: Scene): { map: DebrisMap; frames: CleanFrame[]; drifts: Drift[] } {
  const { frames, drifts } = render(scene);
  const accumulator = new DebrisAccumulator(drifts, tip, settings);
  frames.forEach((f, k) => accumulator.accumulate(f, drifts[k]));
  return { map: accumulator.finish(), frames, drifts };
}

const metallic = (): number => 1;
const insulating = (): number => 0;
const front = (atNm: number) => (x: number, y: number) => 0.5 * (1 + Math.tanh((x + 0.3 * y - atNm) / 40));
/** A cooldown whose front crosses the field, with single-state frames at both ends, under drift. */
const crossing = (n = 10): Scene["frames"] =>
  Array.from({ length: n }, (_, k) => ({
    xNm: 7.3 * k,
    yNm: -11.9 * k,
    share: k < 3 ? metallic : k >= n - 3 ? insulating : front(150 + (800 * (k - 3)) / (n - 6)),
  }));

const share = (mask: Uint8Array, of: (v: number) => boolean): number =>
  mask.reduce((n, v) => n + (of(v) ? 1 : 0), 0) / mask.length;
/** Share of core and margin together. */
const masked = (mask: Uint8Array): number => share(mask, (v) => v !== 0);
const at = (mask: Uint8Array, drift: Drift, d: Dot): number => {
  const j = Math.round((d.xNm - (drift.xNm ?? 0)) / PIXEL_NM);
  const i = Math.round((d.yNm - (drift.yNm ?? 0)) / PIXEL_NM);
  return mask[i * SIZE + j];
};

const dot = (xNm: number, yNm: number, o: Partial<Dot>): Dot => ({
  xNm,
  yNm,
  radiusNm: 30,
  heightNm: 0,
  logFactor: 0,
  turnRad: 0,
  ...o,
});

describe("debris over a cooldown", () => {
  const dots = [
    dot(250, 200, { heightNm: 15 }),
    dot(650, 250, { logFactor: -0.8 }),
    dot(300, 600, { logFactor: 0.5 }),
    dot(700, 650, { turnRad: 0.35 }),
    dot(480, 420, { heightNm: 6, logFactor: -0.4, turnRad: 0.2 }),
  ];

  test("bumps, bright and dark ones and turned phase are found, with little area, in every frame's own place", () => {
    const { map, drifts } = mapOf({ seed: 1, dots, frames: crossing() });
    expect(map.spots).toBe(dots.length);
    for (const drift of drifts) {
      const mask = debrisInFrame(map, drift, SIZE, SIZE);
      // the first is a bump that the signal does not show
      expect(dots.map((d) => at(mask, drift, d))).toEqual([MARGIN, CORE, CORE, CORE, CORE]);
      // five discs of 30 nm and the blur around them, 80 nm at most
      expect(masked(mask)).toBeLessThan((5 * Math.PI * 80 ** 2) / (SIZE * PIXEL_NM) ** 2);
    }
  });

  test("what is left beside the mask departs by less than the pixel noise", () => {
    const { map, drifts } = mapOf({ seed: 2, dots, frames: crossing() });
    const drift = drifts[4];
    const mask = debrisInFrame(map, drift, SIZE, SIZE);
    for (const d of dots) {
      for (let p = 0; p < mask.length; p++) {
        if (mask[p] !== 0) continue;
        const x = (drift.xNm ?? 0) + (p % SIZE) * PIXEL_NM;
        const y = (drift.yNm ?? 0) + Math.floor(p / SIZE) * PIXEL_NM;
        const c = profile(Math.hypot(x - d.xNm, y - d.yNm), d.radiusNm);
        // noise 0.05 on amplitudes of 1: a departure of 0.05 is one sd
        expect(Math.max(Math.abs(d.logFactor), Math.abs(d.turnRad)) * c).toBeLessThan(0.05);
      }
    }
  });

  test("the core is what changes the signal by a sixth of the contrast, to half a pixel, wherever the frame lies", () => {
    // levels 1 and 2.2 e^{0.6i}: the brighter state's ratio to the step between them
    const perContrast = 2.2 / Math.hypot(2.2 * Math.cos(0.6) - 1, 2.2 * Math.sin(0.6));
    const strong = dots.map((d) => ({ ...d, radiusNm: d.radiusNm * 1.5 }));
    for (const [seed, frames] of [
      [21, crossing(16)],
      [22, crossing(16).map((f, k) => ({ ...f, xNm: k === 0 ? 0 : 4.4, yNm: k === 0 ? 0 : -3.7 }))],
    ] as const) {
      const { map, drifts } = mapOf({ seed, dots: strong, frames });
      for (const drift of [drifts[0], drifts[5], drifts[12]]) {
        const mask = debrisInFrame(map, drift, SIZE, SIZE);
        const effect = (xNm: number, yNm: number): number => {
          let log = 0;
          let turn = 0;
          for (const d of strong) {
            const c = profile(Math.hypot(xNm - d.xNm, yNm - d.yNm), d.radiusNm);
            log += d.logFactor * c;
            turn += d.turnRad * c;
          }
          return perContrast * Math.hypot(Math.exp(log) * Math.cos(turn) - 1, Math.exp(log) * Math.sin(turn));
        };
        let affected = 0;
        let missed = 0;
        let core = 0;
        let idle = 0;
        let tooFar = 0;
        for (let p = 0; p < mask.length; p++) {
          const x = (drift.xNm ?? 0) + (p % SIZE) * PIXEL_NM;
          const y = (drift.yNm ?? 0) + Math.floor(p / SIZE) * PIXEL_NM;
          const here = effect(x, y);
          if (here > 0.25) {
            affected++;
            if (mask[p] !== CORE) missed++;
          }
          if (mask[p] !== CORE) continue;
          core++;
          if (here < 0.1) idle++;
          const h = 0.5 * PIXEL_NM;
          const reach = Math.max(...[-h, h].flatMap((dx) => [-h, h].map((dy) => effect(x + dx, y + dy))));
          if (reach < 1 / 6 - 0.03) tooFar++;
        }
        expect(affected).toBeGreaterThan(150);
        expect(missed / affected).toBeLessThan(0.01);
        expect(idle / core).toBeLessThan(0.05);
        expect(tooFar / core).toBeLessThan(0.02);
      }
    }
  });

  test("a bump is core where the frames could not show what it does, and only there", () => {
    const bumps = [dot(200, 200, { heightNm: 15 }), dot(1480, 500, { heightNm: 15 })];
    // the second comes into view at the end, with a wall through it
    const frames = [
      ...crossing(10),
      { xNm: 720, yNm: 0, share: front(1600) },
      { xNm: 725, yNm: 4, share: front(1620) },
    ];
    const { map, drifts } = mapOf({ seed: 23, dots: bumps, frames });
    expect(at(debrisInFrame(map, drifts[0], SIZE, SIZE), drifts[0], bumps[0])).toBe(MARGIN);
    expect(at(debrisInFrame(map, drifts[10], SIZE, SIZE), drifts[10], bumps[1])).toBe(CORE);
  });

  test("a frame whose place is known to half a pixel only gets a wider core", () => {
    const { map, drifts } = mapOf({ seed: 24, dots, frames: crossing() });
    const core = (sdNm: number): number =>
      share(debrisInFrame(map, { ...drifts[4], sdNm }, SIZE, SIZE), (v) => v === CORE);
    expect(core(5)).toBeGreaterThan(1.1 * core(0.5));
    expect(core(5)).toBeLessThan(1.6 * core(0.5));
  });

  test("without debris nothing is masked, though walls cross and one stands still for half of the frames", () => {
    for (const seed of [3, 4, 5]) {
      const frames = crossing(12).map((f, k) => (k >= 3 && k < 9 ? { ...f, share: front(500) } : f));
      expect(masked(mapOf({ seed, dots: [], frames }).map.mask)).toBe(0);
    }
  });

  test("a small domain pinned through the mixed frames is no debris", () => {
    const island = (x: number, y: number): number => 0.5 * (1 + Math.tanh((60 - Math.hypot(x - 350, y - 400)) / 20));
    const frames = crossing(14).map((f, k) => ({
      ...f,
      share:
        k < 4 ? metallic : k < 10 ? (x: number, y: number) => Math.max(island(x, y), front(700)(x, y)) : insulating,
    }));
    expect(masked(mapOf({ seed: 6, dots: [], frames }).map.mask)).toBe(0);
  });

  test("amplitude alone is enough for what shows in it", () => {
    const { map, drifts } = mapOf({ seed: 7, dots, frames: crossing(), withPhase: false, withTopography: false });
    const mask = debrisInFrame(map, drifts[2], SIZE, SIZE);
    expect([1, 2, 4].map((k) => at(mask, drifts[2], dots[k]))).toEqual([1, 1, 1]);
    expect(at(mask, drifts[2], dots[0])).toBe(0);
  });

  test("a series that never leaves one state: dark spots without a bump are debris", () => {
    const frames = Array.from({ length: 5 }, (_, k) => ({ xNm: 20 * k, yNm: 15 * k, share: metallic }));
    const { map, drifts } = mapOf({ seed: 8, dots: dots.slice(1, 3), frames });
    const mask = debrisInFrame(map, drifts[4], SIZE, SIZE);
    for (const d of dots.slice(1, 3)) expect(at(mask, drifts[4], d)).toBe(1);
  });

  test("the map does not depend on the order of the frames", () => {
    const { map, frames, drifts } = mapOf({ seed: 9, dots, frames: crossing() });
    const backwards = new DebrisAccumulator(drifts, tip, settings);
    for (let k = frames.length - 1; k >= 0; k--) backwards.accumulate(frames[k], drifts[k]);
    expect(backwards.finish().mask).toEqual(map.mask);
  });

  test("frames collected in parts make the same map", () => {
    const { map, frames, drifts } = mapOf({ seed: 9, dots, frames: crossing() });
    const whole = new DebrisAccumulator(drifts, tip, settings);
    for (const [from, to] of [
      [0, 4],
      [4, 4],
      [4, 10],
    ]) {
      const part = new DebrisAccumulator(drifts, tip, settings);
      for (let k = from; k < to; k++) part.accumulate(frames[k], drifts[k]);
      whole.addPart(part.part);
    }
    const joined = whole.finish();
    expect(joined.mask).toEqual(map.mask);
    expect(joined.spots).toBe(map.spots);
    joined.strength.forEach((v, p) => expect(v).toBeCloseTo(map.strength[p], 4));
  });
});

describe("the chord between the states", () => {
  const contrast = { logRatio: Math.log(2.2), turnRad: 0.6 };

  test("mixtures of the two states, seen from either and averaged with nothing, lie on it", () => {
    for (const end of [1, -1]) {
      const ratio = 2.2 ** end;
      for (let u = 0; u <= 1; u += 0.07) {
        const re = 1 + u * (ratio * Math.cos(end * 0.6) - 1);
        const im = u * ratio * Math.sin(end * 0.6);
        for (const share of [0.2, 0.7, 1]) {
          const far = distanceFromChord(share * Math.log(Math.hypot(re, im)), share * Math.atan2(im, re), contrast);
          expect(far).toBeLessThan(0.01);
        }
      }
    }
  });

  test("brighter with the phase back, or darker with the phase as it was, does not", () => {
    expect(distanceFromChord(0.5, -0.3, contrast)).toBeGreaterThan(0.4);
    expect(distanceFromChord(-0.8, 0, contrast)).toBeGreaterThan(0.3);
    expect(distanceFromChord(Math.log(2.2) + 0.5, 0.6, contrast)).toBeGreaterThan(0.35);
  });

  test("a particle without a bump that only two frames reach is found by it; a domain there is not taken", () => {
    const corner = dot(1350, 1350, { logFactor: -0.7, turnRad: 0.3, radiusNm: 40 });
    const island = (x: number, y: number): number => 0.5 * (1 + Math.tanh((Math.hypot(x - 1150, y - 1350) - 60) / 20));
    const frames = [...crossing(12), { xNm: 700, yNm: 700, share: island }, { xNm: 720, yNm: 690, share: island }];
    const { map, drifts } = mapOf({ seed: 16, dots: [corner], frames });
    const last = drifts[13];
    const mask = debrisInFrame(map, last, SIZE, SIZE);
    expect(at(mask, last, corner)).toBe(1);
    expect(at(mask, last, { ...corner, xNm: 1150 })).toBe(0);
  });
});

describe("frames without a place", () => {
  test("only clear bumps count; a dark spot may be a domain", () => {
    const dots = [dot(250, 300, { heightNm: 20 }), dot(600, 600, { logFactor: -0.8 })];
    const { frames } = render({ seed: 10, dots, frames: [{ xNm: 0, yNm: 0, share: metallic }] });
    const mask = findDebrisInFrame(frames[0], tip, settings);
    expect(at(mask, { frame: 0, xNm: 0, yNm: 0, sdNm: 0 }, dots[0])).toBe(1);
    expect(at(mask, { frame: 0, xNm: 0, yNm: 0, sdNm: 0 }, dots[1])).toBe(0);
    for (const seed of [11, 12, 13, 14]) {
      const bare = render({ seed, dots: [], frames: [{ xNm: 0, yNm: 0, share: front(400) }] }).frames[0];
      expect(masked(findDebrisInFrame(bare, tip, settings))).toBe(0);
      expect(masked(findDebrisInFrame({ ...bare, topography: null }, null, settings))).toBe(0);
    }
  });

  test("a frame that was not placed adds nothing and gets nothing; no frame at all gives an empty map", () => {
    const { frames } = render({
      seed: 15,
      dots: [dot(400, 400, { heightNm: 30 })],
      frames: [{ xNm: 0, yNm: 0, share: metallic }],
    });
    const lost: Drift = { frame: 0, xNm: null, yNm: null, sdNm: null };
    const accumulator = new DebrisAccumulator([lost], tip, settings);
    accumulator.accumulate(frames[0], lost);
    const map = accumulator.finish();
    expect(map.mask.length).toBe(0);
    expect(masked(debrisInFrame(map, lost, 8, 9))).toBe(0);
    expect(masked(debrisInFrame(map, { frame: 0, xNm: 0, yNm: 0, sdNm: 0 }, 8, 9))).toBe(0);
  });
});
