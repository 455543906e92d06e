import { mkdtempSync, readFileSync, rmSync, statSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import sharp from "sharp";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { demoSpecs, writeDemo } from "../../src/demo/scenario.js";
import { simulateCooldown } from "../../src/demo/simulate.js";
import { defaultSpec } from "../../src/demo/spec.js";
import { readTruth } from "../../src/demo/truth.js";
import { generateStack } from "../../src/demo/write_stack.js";
import { createTiff } from "../../src/demo/write_tiff.js";
import { loadFrame, readCooldown } from "../../src/input/index.js";
import { dataOf } from "../../src/model/raster.js";

let dir = "";
beforeAll(() => {
  dir = mkdtempSync(join(tmpdir(), "coldseam-demo-"));
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

test("the TIFF writer's pages come back to the bit, NaN and all, through a reader of another make", async () => {
  const file = join(dir, "pages.tif");
  const writer = createTiff(file);
  const pages = [
    { rows: 3, cols: 5 },
    { rows: 200, cols: 301 }, // several strips, the last one shorter
    { rows: 1, cols: 1 },
  ].map(({ rows, cols }, p) => {
    const data = Float32Array.from({ length: rows * cols }, (_, k) => Math.sin(k + p) * 10 ** (k % 30));
    data[0] = p === 1 ? Number.NaN : -Infinity;
    writer.addPage(data, rows, cols);
    return { rows, cols, data };
  });
  expect(() => writer.addPage(new Float32Array(5), 2, 3)).toThrow(RangeError);
  writer.close();
  expect((await sharp(file).metadata()).pages).toBe(3);
  for (const [p, page] of pages.entries()) {
    const image = sharp(file, { page: p }).toColourspace("b-w").raw({ depth: "float" });
    const { data, info } = await image.toBuffer({ resolveWithObject: true });
    expect([info.height, info.width, info.channels]).toEqual([page.rows, page.cols, 1]);
    expect(new Float32Array(new Uint8Array(data).buffer)).toEqual(page.data);
  }
});

test("a generated cooldown is read back through the front door as it was simulated", async () => {
  const spec = defaultSpec({
    rows: 30,
    cols: 44,
    pixel: { xNm: 10, yNm: 12 },
    tip: { statedNm: 31, statedSdNm: 2 },
    series: [
      { branch: "cooling", temperaturesK: [165, 153.25] },
      { branch: "warming", temperaturesK: [150, 162] },
      { branch: "cooling", temperaturesK: [151] },
    ],
  });
  const yaml = generateStack(spec, join(dir, "stack"));
  const cooldown = await readCooldown(yaml);
  expect([cooldown.sample, cooldown.cooldown, cooldown.region]).toEqual([spec.sample, spec.cooldown, spec.region]);
  expect(cooldown.pixel).toEqual(spec.pixel);
  expect(cooldown.tip).toEqual({ resolutionNm: 31, resolutionSdNm: 2 });
  const simulated = simulateCooldown(spec);
  const truth = readTruth(join(dir, "stack"));
  expect(cooldown.frames.map((f) => [f.branch, f.cycle, f.temperatureK])).toEqual(
    simulated.plan.map((p) => [p.branch, p.cycle, p.temperatureK]),
  );
  expect(truth.spec).toEqual(spec);
  expect(truth.cycles).toEqual(simulated.cycles());
  for (const info of cooldown.frames) {
    const read = await loadFrame(cooldown, info);
    const made = simulated.frame(info.frame);
    for (const c of ["topography", "amplitude", "phase"] as const) {
      const raster = read[c];
      expect(raster === null ? null : dataOf(raster)).toEqual(dataOf(made[c]));
    }
    expect(truth.frames[info.frame].metallicFraction).toBe(made.truth.metallicFraction);
  }
});

describe("the demo", () => {
  test("small: two cooldowns of one region, one with fringes, both branches from one pure state to the other", async () => {
    const files = writeDemo(join(dir, "demo"), { size: "small", seed: 3 });
    expect(files.map((f) => f.slice(dir.length + 1))).toEqual([
      join("demo", "kv14-run1", "cooldown.yaml"),
      join("demo", "kv14-run2", "cooldown.yaml"),
    ]);
    const truths = ["kv14-run1", "kv14-run2"].map((c) => readTruth(join(dir, "demo", c)));
    expect(truths.map((t) => t.hasFringes)).toEqual([true, false]);
    expect(truths[0].frames.some((f) => f.unmeasuredPixels > 0)).toBe(true);
    for (const t of truths) {
      expect(t.frames.length).toBe(16);
      expect([0, 7, 8, 15].map((k) => t.frames[k].singleState)).toEqual([
        "metallic",
        "insulating",
        "insulating",
        "metallic",
      ]);
      expect(t.frames.filter((f) => f.singleState === null).length).toBeGreaterThanOrEqual(6);
      expect(t.cycles[0].widthK).toBeGreaterThan(3);
      for (const f of t.frames) expect(Math.hypot(f.driftXNm, f.driftYNm)).toBeLessThan(0.3 * 1120);
      const stack = join(dir, "demo", t.cooldown, "cooling_phase.tif");
      expect(statSync(stack).size).toBeLessThan(8 * 112 * 112 * 4 + 8 * 400);
    }
    const cooldown = await readCooldown(files[0]);
    expect(cooldown.frames.length).toBe(16);
    expect(readFileSync(files[0], "utf8")).toContain("sample: KV-14");
  });

  test("its fringe stands out: blurred by the tip still more than three times the optical phase's noise", () => {
    const [spec, other] = demoSpecs();
    const { fringe, noise, levels } = spec;
    const sigma = spec.tip.resolutionNm / 2.3548;
    let peak = 0;
    for (let d = 0; d < 300; d++)
      peak = Math.max(
        peak,
        fringe.amplitudeRad *
          Math.cos((2 * Math.PI * d) / fringe.periodNm + fringe.phaseRad) *
          Math.exp(-d / fringe.decayNm),
      );
    peak *= Math.exp(-2 * Math.PI ** 2 * (sigma / fringe.periodNm) ** 2);
    expect(peak).toBeGreaterThan(3 * Math.hypot(noise.complex / levels.amplitudeMetallic, noise.phaseRad));
    expect(fringe.periodNm).toBeGreaterThan(2 * spec.tip.resolutionNm);
    expect(other.fringe.amplitudeRad).toBe(0);
    expect(other.sampleSeed).toBe(spec.sampleSeed);
    expect(other.seed).not.toBe(spec.seed);
  });
});
