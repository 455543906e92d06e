import { describe, expect, test } from "vitest";
import type { FrameInfo } from "../../../src/model/cooldown.js";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRandom } from "../../../src/numerics/random.js";
import {
  choosePairs,
  measurePair,
  prepareForDrift,
  solveDrift,
  type MeasuredShift,
  type PairShift,
} from "../../../src/stages/drift/index.js";
import { settings } from "../../../src/stages/drift/settings.js";
import { blemish, bound, makeScene, topographyFrame } from "./scene.js";

const s = defaultsOf(settings);

function infos(n: number): FrameInfo[] {
  const source = { file: "", label: "", format: "npy", page: 0, scale: 1 } as const;
  return Array.from({ length: n }, (_, frame) => ({
    frame,
    series: frame < n / 2 ? 0 : 1,
    branch: frame < n / 2 ? "cooling" : "warming",
    cycle: 1,
    temperatureK: frame < n / 2 ? 180 - 5 * frame : 180 - 5 * (n - 1 - frame),
    startedAt: null,
    endedAt: null,
    stageXNm: null,
    stageYNm: null,
    rows: 100,
    cols: 100,
    sources: { amplitude: source },
  }));
}

type Place = readonly [number, number];

function shift(
  a: number,
  b: number,
  places: readonly Place[],
  off: Place = [0, 0],
  changes: Partial<MeasuredShift> = {},
): MeasuredShift {
  return {
    reference: a,
    moving: b,
    status: "ok",
    xNm: places[b][0] - places[a][0] + off[0],
    yNm: places[b][1] - places[a][1] + off[1],
    xxNm2: 0.04,
    xyNm2: 0,
    yyNm2: 0.04,
    stretch: { xNm: 0, yNm: 0, sdXNm: 1, sdYNm: 1 },
    overlap: 0.9,
    peak: 20,
    ratio: 0.2,
    framed: 1,
    correlation: 0.9,
    features: 20,
    channel: "topography",
    pixel: { xNm: 10, yNm: 10 },
    widthNm: 1000,
    heightNm: 1000,
    ...changes,
  };
}

const walk = (n: number): Place[] => Array.from({ length: n }, (_, k) => [17 * k, -9 * k + 3 * (k % 2)]);
const measuredAll = (n: number, places: readonly Place[]): [number, number][] =>
  choosePairs(infos(n), null, s).filter(([a, b]) => a < places.length && b < places.length);

describe("choosing pairs", () => {
  test("each pair once, the earlier frame first, every frame tied to the first; as many as frames, both rounds", () => {
    for (const n of [2, 3, 24, 80]) {
      const first = choosePairs(infos(n), null, s);
      const places = walk(n).map(([xNm, yNm]) => ({ xNm, yNm }));
      const second = choosePairs(infos(n), places, s);
      for (const list of [first, second]) {
        expect(new Set(list.map(String)).size).toBe(list.length);
        for (const [a, b] of list) expect(a).toBeLessThan(b);
      }
      for (let k = 1; k < n; k++) expect(first.some(([a, b]) => a === 0 && b === k)).toBe(true);
      const all = new Set([...first, ...second].map(String));
      expect(all.size).toBeLessThanOrEqual(s.pairsPerFrame * n);
    }
  });

  test("a long cooldown: as many pairs as frames, none left out, and no frame is tied to more than two stretches' worth of others", () => {
    const n = 700;
    const places = walk(n).map(([xNm, yNm]) => ({ xNm, yNm }));
    const all = [...choosePairs(infos(n), null, s), ...choosePairs(infos(n), places, s)];
    const known = new Set(all.map(String));
    expect(known.size).toBeLessThanOrEqual(s.pairsPerFrame * n);
    const partners = new Int32Array(n);
    for (const key of known) for (const i of key.split(",")) partners[Number(i)]++;
    expect(Math.min(...partners)).toBeGreaterThanOrEqual(4);
    expect(Math.max(...partners)).toBeLessThan(256 + 32);
    // every stretch has several frames tied to the first one
    for (let from = 0; from < n; from += 128) {
      const tied = [...known].filter((key) => {
        const [a, b] = key.split(",").map(Number);
        return a === 0 && b >= from && b < from + 128;
      });
      expect(tied.length).toBeGreaterThanOrEqual(8);
    }
  });

  test("a frame whose place is known well enough is asked no more; one less well known, or of unknown sd, is", () => {
    const n = 24;
    const places = walk(n).map(([xNm, yNm], k) => ({ xNm, yNm, sdNm: k === 5 ? 0.2 : k === 9 ? null : 0.02 }));
    expect(choosePairs(infos(n), places, s, 0.3).every((pair) => pair.includes(9))).toBe(true);
    const more = choosePairs(infos(n), places, s, 0.03);
    expect(more.length).toBeGreaterThanOrEqual(4);
    expect(more.every((pair) => pair.includes(5) || pair.includes(9))).toBe(true);
    expect(choosePairs(infos(n), places, s).length).toBeGreaterThan(n);
  });

  test("a branch is tied to the frames of the other that are nearest in temperature", () => {
    const pairs = choosePairs(infos(24), null, s).map(String);
    expect(pairs).toContain("8,15");
  });
});

describe("solving", () => {
  test("right shifts give the places, and no notice", () => {
    const places = walk(12);
    const { drifts, notices, rejected } = solveDrift(
      infos(12),
      measuredAll(12, places).map(([a, b]) => shift(a, b, places)),
      s,
    );
    expect(drifts[0]).toEqual({ frame: 0, xNm: 0, yNm: 0, sdNm: 0 });
    drifts.forEach((d, k) => {
      expect(d.xNm).toBeCloseTo(places[k][0], 6);
      expect(d.yNm).toBeCloseTo(places[k][1], 6);
    });
    expect(notices).toEqual([]);
    expect(rejected).toEqual([]);
  });

  test("a fifth of the shifts are wrong peaks: found, left out and said", () => {
    const places = walk(24);
    const random = makeRandom(3);
    const wrong: string[] = [];
    const pairs = measuredAll(24, places).map(([a, b], k) => {
      if (k % 5 !== 2) return shift(a, b, places);
      wrong.push(`${a},${b}`);
      return shift(a, b, places, [300 * random.normal(), 300 * random.normal()]);
    });
    const { drifts, rejected, notices } = solveDrift(infos(24), pairs, s);
    drifts.forEach((d, k) => {
      expect(d.xNm).toBeCloseTo(places[k][0], 6);
      expect(d.yNm).toBeCloseTo(places[k][1], 6);
    });
    expect(rejected.map(String).sort()).toEqual(wrong.sort());
    expect(notices.map((n) => n.code)).toContain("drift-pairs-rejected");
  });

  test("a frame without a trusted shift has no numbers and a notice; the others are placed", () => {
    const places = walk(10);
    const pairs = measuredAll(10, places).map(([a, b]): PairShift =>
      a === 4 || b === 4 ? { reference: a, moving: b, status: "failed", reason: "no-peak" } : shift(a, b, places),
    );
    const { drifts, notices } = solveDrift(infos(10), pairs, s);
    expect(drifts[4]).toEqual({ frame: 4, xNm: null, yNm: null, sdNm: null });
    expect(drifts.filter((d) => d.xNm === null)).toHaveLength(1);
    expect(notices).toHaveLength(1);
    expect(notices[0]).toMatchObject({ frame: 4, code: "drift-failed" });
  });

  test("doubtful shifts that agree with one another place no frame", () => {
    const places = walk(8);
    const pairs = measuredAll(8, places).map(([a, b]) =>
      b === 6 || a === 6
        ? shift(a, b, places, b === 6 ? [500, 0] : [-500, 0], { status: "ambiguous" })
        : shift(a, b, places),
    );
    expect(solveDrift(infos(8), pairs, s).drifts[6].xNm).toBeNull();
  });

  test("a single shift that nothing confirms is used, and said; one that another contradicts is not", () => {
    const places = walk(6);
    const rest = measuredAll(6, places).filter(([, b]) => b !== 5);
    const one = [...rest, [3, 5] as [number, number]].map(([a, b]) => shift(a, b, places));
    const used = solveDrift(infos(6), one, s);
    expect(used.drifts[5].xNm).toBeCloseTo(places[5][0], 6);
    expect(used.notices).toMatchObject([{ frame: 5, code: "drift-unchecked" }]);
    const two = [...one, shift(1, 5, places, [200, 100])];
    expect(solveDrift(infos(6), two, s).drifts[5].xNm).toBeNull();
  });

  test("where the first frame cannot be linked no frame has a place, and the rest is given as a group", () => {
    const places = walk(8);
    const pairs = measuredAll(8, places)
      .filter(([a]) => a !== 0)
      .map(([a, b]) => shift(a, b, places));
    const { drifts, notices, groups } = solveDrift(infos(8), pairs, s);
    expect(drifts[0]).toEqual({ frame: 0, xNm: 0, yNm: 0, sdNm: 0 });
    expect(drifts.slice(1).every((d) => d.xNm === null)).toBe(true);
    expect(notices).toMatchObject([{ frame: null, code: "drift-failed" }]);
    expect(groups[0].frames).toEqual([1, 2, 3, 4, 5, 6, 7]);
    expect(groups[0].xNm[3]).toBeCloseTo(places[4][0] - places[1][0], 6);
  });

  test("noise of a frame enters all its pairs: many pairs do not lower the standard deviation below that of the two frames", () => {
    // full overlap, every pair the exact difference of frame errors: then any chain gives e_k − e_0
    const n = 16;
    const places: Place[] = Array.from({ length: n }, () => [0, 0]);
    const all = measuredAll(n, places);
    const framed = solveDrift(
      infos(n),
      all.map(([a, b]) => shift(a, b, places)),
      s,
    );
    for (const d of framed.drifts.slice(1)) expect(d.sdNm).toBeCloseTo(0.2, 2);
    const free = solveDrift(
      infos(n),
      all.map(([a, b]) => shift(a, b, places, [0, 0], { framed: 0 })),
      s,
    );
    for (const d of free.drifts.slice(1)) expect(d.sdNm).toBeLessThan(0.16);
  });

  test("errors larger than the pairs promise show in triangles that do not close, and the standard deviations are raised to the truth", () => {
    const n = 16;
    const places = walk(n);
    let pull = 0;
    for (let run = 0; run < 20; run++) {
      const random = makeRandom(50 + run);
      const pairs = measuredAll(n, places).map(([a, b]) =>
        shift(a, b, places, [2 * random.normal(), 2 * random.normal()]),
      );
      const { drifts, closureRatio } = solveDrift(infos(n), pairs, s);
      expect(closureRatio).toBeGreaterThan(5);
      for (const d of drifts.slice(1)) {
        if (d.xNm === null || d.yNm === null || d.sdNm === null) throw new Error(`frame ${d.frame} not placed`);
        const [x, y] = places[d.frame];
        pull += (0.5 * ((d.xNm - x) ** 2 + (d.yNm - y) ** 2)) / d.sdNm ** 2 / (20 * (n - 1));
      }
    }
    expect(Math.sqrt(pull)).toBeGreaterThan(0.8);
    expect(Math.sqrt(pull)).toBeLessThan(1.25);
  });
});

test("simulated cooldowns: error within 1.5 of the bound for two noisy frames, and over the stated standard deviation near 1", () => {
  const pixel = { xNm: 10, yNm: 12 };
  const [n, rows, cols, noise] = [7, 72, 80, 0.3];
  let error = 0;
  let limit = 0;
  let pull = 0;
  let count = 0;
  for (let run = 0; run < 16; run++) {
    const random = makeRandom(60 + run);
    const scene = makeScene({ seed: 80 + run, waves: 80 });
    const at = [{ x: 0, y: 0 }];
    while (at.length < n) {
      const last = at[at.length - 1];
      at.push({ x: last.x + 30 * random.normal(), y: last.y + 30 * random.normal() });
    }
    const images = at.map((p, k) => {
      const data = blemish(scene.render(rows, cols, pixel, p.x, p.y), rows, cols, 100 * run + k, {
        noise,
        rowNoise: 0.2,
      });
      return prepareForDrift(topographyFrame(k, data, rows, cols, pixel), s);
    });
    const first = choosePairs(infos(n), null, s);
    const shifts = first.map(([a, b]) => measurePair(images[a], images[b], null, s));
    const rough = solveDrift(infos(n), shifts, s).drifts;
    const known = new Set(first.map(String));
    for (const [a, b] of choosePairs(infos(n), rough, s)) {
      if (!known.has(`${a},${b}`)) shifts.push(measurePair(images[a], images[b], null, s));
    }
    const { drifts } = solveDrift(infos(n), shifts, s);
    for (let k = 1; k < n; k++) {
      const d = drifts[k];
      if (d.xNm === null || d.yNm === null || d.sdNm === null) throw new Error(`frame ${k} not placed`);
      const square = 0.5 * ((d.xNm - at[k].x) ** 2 + (d.yNm - at[k].y) ** 2);
      const b = bound(scene, rows, cols, pixel, noise, at[0], at[k]);
      error += square;
      limit += 0.5 * (b.x * b.x + b.y * b.y);
      pull += square / d.sdNm ** 2;
      count++;
    }
  }
  expect(Math.sqrt(error / limit)).toBeLessThan(1.5);
  // the first frame's own noise is common to a run, whose ratio scatters by 0.3: by 0.08 for 16 runs
  expect(Math.sqrt(pull / count)).toBeGreaterThan(0.8);
  expect(Math.sqrt(pull / count)).toBeLessThan(1.25);
});
