import { expect, test } from "vitest";
import { makeRaster } from "../../../src/model/raster.js";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { measurePair, prepareForDrift, solveDrift } from "../../../src/stages/drift/index.js";
import { settings } from "../../../src/stages/drift/settings.js";

const s = defaultsOf(settings);
const pixel = { xNm: 10, yNm: 10 };
const [rows, cols] = [128, 128];
const random = makeRandom(12);
const particles = Array.from({ length: 60 }, () => ({
  x: 2600 * random.uniform() - 600,
  y: 2600 * random.uniform() - 600,
  factor: random.uniform() < 0.5 ? -0.5 : 0.6,
}));

/** Amplitude of a film whose metallic half, right of `wallNm`, is 2.2 times as bright; particles multiply it. */
function frame(k: number, atX: number, atY: number, wallNm: number, noise: number) {
  const source = makeRandom(300 + k);
  const data = Float32Array.from({ length: rows * cols }, (_, p) => {
    const x = 10 * (p % cols) + atX;
    const y = 10 * Math.floor(p / cols) + atY;
    const share = 0.5 * (1 + Math.tanh((x + 40 * Math.sin(y / 150) - wallNm) / 45));
    let factor = 1;
    for (const q of particles) factor += q.factor * Math.exp(-((x - q.x) ** 2 + (y - q.y) ** 2) / (2 * 25 * 25));
    return (1 + 1.2 * share) * factor + noise * source.normal();
  });
  return prepareForDrift(
    { frame: k, pixel, topography: null, amplitude: makeRaster(data, rows, cols, pixel), phase: null },
    s,
  );
}

test("without topography: marks in the amplitude give the drift, a wall that moves does not drag it along", () => {
  // the wall runs 15 px on a pair, which a shift by the whole image would take for drift
  let bias = 0;
  let pull = 0;
  const pairs = 12;
  for (let k = 0; k < pairs; k++) {
    const d = { x: 60 * Math.sin(k), y: 50 * Math.cos(k) };
    const p = measurePair(frame(2 * k, 0, 0, 500, 0.05), frame(2 * k + 1, d.x, d.y, 650, 0.05), null, s);
    if (p.status === "failed") throw new Error(p.reason);
    expect(p).toMatchObject({ status: "ok", channel: "marks" });
    expect(Math.abs(p.xNm - d.x)).toBeLessThan(2);
    expect(Math.abs(p.yNm - d.y)).toBeLessThan(2);
    bias += (p.xNm - d.x) / pairs;
    pull += ((p.xNm - d.x) ** 2 / p.xxNm2 + (p.yNm - d.y) ** 2 / p.yyNm2) / (2 * pairs);
  }
  // 12 pairs of 0.3 nm: their mean is known to 0.1 nm
  expect(Math.abs(bias)).toBeLessThan(0.4);
  expect(Math.sqrt(pull)).toBeGreaterThan(0.6);
  expect(Math.sqrt(pull)).toBeLessThan(1.4);
});

test("without topography: said in a notice", () => {
  const images = [frame(0, 0, 0, 500, 0.05), frame(1, 30, -20, 600, 0.05)];
  const source = { file: "", label: "", format: "npy", page: 0, scale: 1 } as const;
  const frames = images.map((_, k) => ({
    frame: k,
    series: 0,
    branch: "cooling" as const,
    cycle: 1,
    temperatureK: 150 - k,
    startedAt: null,
    endedAt: null,
    stageXNm: null,
    stageYNm: null,
    rows,
    cols,
    sources: { amplitude: source },
  }));
  const { drifts, notices } = solveDrift(frames, [measurePair(images[0], images[1], null, s)], s);
  expect(Math.abs((drifts[1].xNm ?? Number.NaN) - 30)).toBeLessThan(2);
  expect(notices.map((n) => n.code)).toContain("drift-on-amplitude");
});
