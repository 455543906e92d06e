import { copyFileSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import { afterEach, beforeEach, describe, expect, test } from "vitest";
import {
  describeCooldown,
  draftCooldown,
  inspectFrame,
  loadFrame,
  readCooldown,
  surveyCooldown,
} from "../../src/input/index.js";
import { joinRetrace } from "../../src/input/retrace.js";
import type { Cooldown, RawFrame } from "../../src/model/cooldown.js";
import { makeRandom } from "../../src/numerics/random.js";
import { CooldownFolder, problemsOf } from "./folder.js";

const FILES = join(import.meta.dirname, "../../fixtures/files");
let folder: CooldownFolder;
beforeEach(() => {
  folder = new CooldownFolder();
});
afterEach(() => folder.remove());

const HEAD = "sample: S\ncooldown: C\n";
const PIXEL = "scan: { pixel_size_nm: [10, 12] }\n";
const read = (rest: string, head = HEAD + PIXEL): Promise<Cooldown> =>
  readCooldown(folder.text("cooldown.yaml", head + rest));
const stacks = (map: string, temperatures: string | null = "[180, 170]"): string =>
  `series:\n- branch: cooling\n  stacks: ${map}\n${temperatures === null ? "" : `  temperatures_K: ${temperatures}\n`}`;
const fixture = (name: string): void => copyFileSync(join(FILES, name), join(folder.path, name));
const frame = (c: Cooldown, k: number): Promise<RawFrame> => {
  const info = c.frames[k];
  if (info === undefined) throw new Error(`no frame ${k}`);
  return loadFrame(c, info);
};
/** Complex64 pages [pages][rows × columns] as a .npy file. */
function complexNpy(
  name: string,
  pages: number,
  rows: number,
  cols: number,
  value: (k: number) => [number, number],
): void {
  const header = `{'descr': '<c8', 'fortran_order': False, 'shape': (${pages}, ${rows}, ${cols}), }`.padEnd(117) + "\n";
  const data = new Float32Array(2 * pages * rows * cols);
  for (let k = 0; k < data.length / 2; k++) data.set(value(k), 2 * k);
  const lead = Buffer.from("\x93NUMPY\x01\0\0\0", "latin1");
  lead.writeUInt16LE(header.length, 8);
  writeFileSync(join(folder.path, name), Buffer.concat([lead, Buffer.from(header), Buffer.from(data.buffer)]));
}

describe("a complex signal", () => {
  const polar = (k: number): [number, number] => [(1 + 0.1 * k) * Math.cos(0.5 * k), (1 + 0.1 * k) * Math.sin(0.5 * k)];
  const wrapped = (x: number): number => Math.atan2(Math.sin(x), Math.cos(x));

  test("one complex channel gives amplitude and phase, whatever the phase's unit elsewhere", async () => {
    complexNpy("z.npy", 2, 3, 4, (k) => (k === 5 ? [NaN, 1] : polar(k)));
    const c = await read(`channels: { phase: { unit: deg } }\n${stacks("{ signal: z.npy }")}`);
    expect(Object.keys(c.frames[0]?.sources ?? {}).sort()).toEqual(["amplitude", "phase"]);
    expect(c.sources.map((s) => s.path)).toEqual(["cooldown.yaml", "z.npy"]);
    expect(structuredClone(c)).toEqual(c);
    expect(c.notices).toEqual([]);
    for (const k of [0, 1]) {
      const raw = await frame(c, k);
      raw.amplitude.values.data.forEach((a, i) => {
        const n = 12 * k + i;
        if (n === 5) return expect([a, raw.phase?.values.data[i]]).toEqual([NaN, NaN]);
        expect(a).toBeCloseTo(1 + 0.1 * n, 5);
        return expect(raw.phase?.values.data[i]).toBeCloseTo(wrapped(0.5 * n), 5);
      });
    }
  });

  test("real and imaginary part, in a table, from files of different kinds", async () => {
    folder.text("re.csv", "3,0\n-1,5\n");
    folder.stack("im.tif", 1, 2, 2, (_, i, j) => [4, 2, 0, 12][2 * i + j] ?? NaN);
    folder.text("f.csv", "temperature_K,real,imaginary\n180,re.csv,im.tif#0\n");
    const c = await read("series:\n- { branch: cooling, frames: f.csv }\n");
    expect(c.sources.map((s) => s.path)).toEqual(["cooldown.yaml", "f.csv", "re.csv", "im.tif"]);
    const raw = await frame(c, 0);
    expect([...raw.amplitude.values.data]).toEqual([5, 2, 1, 13]);
    expect([...(raw.phase?.values.data ?? [])].map((v) => Number(v.toFixed(6)))).toEqual([
      0.927295,
      1.570796,
      Number(Math.PI.toFixed(6)),
      1.176005,
    ]);
  });

  test.each([
    ["{ signal: z.npy, amplitude: a.tif }", /amplitude or phase beside signal: the signal is given twice/],
    ["{ real: a.tif }", /real without imaginary \| add `imaginary`/],
    ["{ imaginary: a.tif, real: a.tif, phase: a.tif }", /amplitude or phase beside real or imaginary/],
    ["{ amplitude: z.npy }", /amplitude is "z\.npy#0", which holds complex numbers \| name it `signal`/],
    ["{ signal: a.tif }", /signal is "a\.tif#0", which holds real numbers \(float32\)/],
    ["{ phase: a.tif }", /stacks\.amplitude is missing/],
    ["{ amplitude: a.tif, phase_retrace: a.tif }", /phase_retrace without phase/],
    ["{ amplitude: a.tif#0:1 }", /"a\.tif#0:1" names one page; .* \| write "a\.tif#:1"/],
    ["{ amplitude: 'a.tif#:1' }", /amplitude is "a\.tif#0:1", but a pixel has 1 sample/],
  ])("%s", async (map, words) => {
    complexNpy("z.npy", 2, 6, 5, polar);
    folder.stack("a.tif", 2);
    expect((await problemsOf(read(stacks(map)))).join("\n")).toMatch(words);
  });
});

describe("channels inside one file", () => {
  test("samples of a TIFF, named; all sizes from one file", async () => {
    fixture("samples-f4.tif");
    const c = await read(stacks("{ amplitude: 'samples-f4.tif#:2', topography: 'samples-f4.tif#:0' }"));
    expect(c.frames[1]?.sources.amplitude).toMatchObject({ label: "samples-f4.tif#1:2", page: 1, sample: 2 });
    const [a, t] = [(await frame(c, 1)).amplitude, (await frame(c, 1)).topography];
    expect(a.values.data).not.toEqual(t?.values.data);
    folder.text("f.csv", "temperature_K,amplitude\n180,samples-f4.tif#0\n170,samples-f4.tif#1\n");
    expect(await problemsOf(read("series:\n- { branch: cooling, frames: f.csv }\n"))).toEqual(
      [0, 1].map((k) =>
        expect.stringMatching(
          `"samples-f4.tif#${k}", which has 3 samples a pixel \\| say which: "samples-f4.tif#${k}:0"`,
        ),
      ),
    );
  });

  test("NeXus: temperatures and pixel size from the axes, or compared with what is written", async () => {
    fixture("run.nxs");
    const map = "{ amplitude: 'run.nxs:/entry/data/amplitude', phase: 'run.nxs:/entry/data/phase' }";
    const c = await read(stacks(map, null), HEAD);
    expect(c.pixel).toEqual({ xNm: 10, yNm: 12 });
    expect(c.frames.map((f) => Number(f.temperatureK.toFixed(6)))).toEqual([180, 175, 170]);
    expect(c.frames[1]?.sources.phase).toMatchObject({ format: "hdf5", dataset: "/entry/data/phase", page: 1 });
    expect(c.notices.map((n) => n.code)).toEqual(["pixel-size-from-file"]);
    expect((await frame(c, 2)).amplitude.values.shape).toEqual([19, 23]);
    const both = await read(stacks(map, "[180, 176, 170]"), `${HEAD}scan: { pixel_size_nm: [10, 10] }\n`);
    expect(both.frames[1]?.temperatureK).toBe(176);
    expect(both.notices.map((n) => n.message)).toEqual([
      "1 temperature of the axis of run.nxs:/entry/data/amplitude differ by more than 0.5 K from those that are used",
      "1 temperature of the axis of run.nxs:/entry/data/phase differ by more than 0.5 K from those that are used",
      "pixels of 10 × 10 nm as described, but run.nxs:/entry/data/amplitude says 10 × 12 nm: the description is used",
    ]);
    const page = "temperature_K,amplitude\n180,run.nxs:/entry/data/amplitude#2\n";
    folder.text("f.csv", page);
    const t = await read("series:\n- { branch: cooling, frames: f.csv }\n");
    expect((await frame(t, 0)).amplitude.values.data).toEqual((await frame(c, 2)).amplitude.values.data);
  });

  test("OME-TIFF: its size is the default; without any size there is an error; files that disagree", async () => {
    fixture("sized.ome.tif");
    const map = "{ amplitude: sized.ome.tif }";
    expect((await read(stacks(map, "[3, 2, 1]"), HEAD)).pixel).toEqual({ xNm: 10, yNm: 12 });
    folder.stack("a.tif", 2);
    expect(await problemsOf(read(stacks("{ amplitude: a.tif }"), HEAD))).toEqual([
      expect.stringMatching(/:1:1: scan is missing; expected a map with pixel_size_nm \| add `scan:/),
    ]);
    expect(await problemsOf(read(stacks("{ amplitude: a.tif }"), `${HEAD}scan: {}\n`))).toEqual([
      expect.stringMatching(/:3:\d+: scan\.pixel_size_nm is missing/),
    ]);
  });

  test("the harmonic is kept and shown", async () => {
    folder.stack("a.tif", 2);
    const c = await read(`channels: { amplitude: { harmonic: 3, unit: mV } }\n${stacks("{ amplitude: a.tif }")}`);
    expect(c.amplitudeHarmonic).toBe(3);
    expect(describeCooldown(c).join("\n")).toContain("amplitude (harmonic 3) in mV");
    expect(
      await problemsOf(read(`channels: { amplitude: { harmonic: 2.5 } }\n${stacks("{ amplitude: a.tif }")}`)),
    ).toEqual([expect.stringMatching(/channels\.amplitude\.harmonic is 2\.5; expected the harmonic/)]);
  });
});

describe("trace and retrace", () => {
  const PIXELS = 4096;
  const two = (k: number): number => (k % 64 < 32 ? 1 : 1.5);
  const noisy = (seed: number, sd: number, level = two): Float32Array => {
    const random = makeRandom(seed);
    return Float32Array.from({ length: PIXELS }, (_, k) => level(k) + sd * random.normal());
  };

  test("are averaged, and their difference tells the noise of the average", () => {
    const sds: number[] = [];
    for (let seed = 0; seed < 20; seed++) {
      const [a, b] = [noisy(2 * seed + 1, 0.05), noisy(2 * seed + 2, 0.05)];
      const joined = joinRetrace(a, b, 64, false);
      expect(joined.disagreement).toBeNull();
      sds.push((joined.noiseSd ?? NaN) / (0.05 / Math.SQRT2));
      const error = Math.sqrt(a.reduce((s, v, k) => s + (v - two(k)) ** 2, 0) / PIXELS);
      expect(Math.abs(error / (0.05 / Math.SQRT2) - 1)).toBeLessThan(0.06); // 5 standard errors of 4096 pixels
    }
    const mean = sds.reduce((s, v) => s + v, 0) / sds.length;
    expect(Math.abs(mean - 1)).toBeLessThan(0.012); // 3 standard errors: MAD's is 1.166/√(2·4096) each
  });

  test("pixels that differ, or that either lacks, are not measured", () => {
    const [a, b] = [noisy(1, 0.05), noisy(2, 0.05)];
    for (let k = 100; k < 160; k++) b[k] = 9;
    a[7] = NaN;
    b[9] = NaN;
    const joined = joinRetrace(a, b, 64, false);
    expect(joined.disagreement).toBe("trace and retrace differ in 1.5 % of the pixels, which count as not measured");
    const gone = [...a.keys()].filter((k) => Number.isNaN(a[k]));
    expect(gone.length).toBe(62);
    expect([gone[0], gone[1], gone[2]]).toEqual([7, 9, 100]);
  });

  test("a shift along the scan line, which would widen the walls, is found to a tenth of a pixel, and none without one", () => {
    const wall = (shift: number) => (k: number) => 1 + 0.25 * (1 + Math.tanh(((k % 64) - 32.3 - shift) / 1.5));
    for (let seed = 1; seed <= 8; seed++) {
      const trace = (): Float32Array => noisy(2 * seed, 0.02, wall(0));
      expect(joinRetrace(trace(), noisy(2 * seed + 1, 0.02, wall(0)), 64, false).disagreement).toBeNull();
      for (const shift of [-2, 0.3, 1]) {
        const a = trace();
        const joined = joinRetrace(a, noisy(2 * seed + 1, 0.02, wall(shift)), 64, false);
        expect(joined.noiseSd).toBeNull();
        expect(a).toEqual(trace());
        const px = Number(/lies (\d\.\d\d) pixels/.exec(joined.disagreement ?? "")?.[1]);
        if (shift === 0.3) expect(Math.abs(px - 0.3)).toBeLessThan(0.1);
      }
    }
  });

  test("angles are averaged around the circle", () => {
    const a = noisy(1, 0.02, () => Math.PI).map((v) => Math.atan2(Math.sin(v), Math.cos(v)));
    const b = noisy(2, 0.02, () => -Math.PI).map((v) => Math.atan2(Math.sin(v), Math.cos(v)));
    const joined = joinRetrace(a, b, 64, true);
    expect(joined.disagreement).toBeNull();
    for (const v of a) expect(Math.cos(v)).toBeLessThan(-0.99);
  });

  test("that do not belong together: the trace alone, and it is told by the frame", async () => {
    folder.stack("a.tif", 2, 64, 64, (_, i, j) => 1 + (j < 32 ? 0.5 : 0) + 0.01 * Math.sin(i * 7 + j * 3));
    folder.stack(
      "b.tif",
      2,
      64,
      64,
      (p, i, j) => 1 + ((p === 0 ? j : i) < 32 ? 0.5 : 0) + 0.01 * Math.cos(i * 5 + j * 11),
    );
    const c = await read(stacks("{ amplitude: a.tif, amplitude_retrace: b.tif }"));
    expect(c.sources.map((s) => s.path)).toEqual(["cooldown.yaml", "a.tif", "b.tif"]);
    const [first, second] = [await frame(c, 0), await frame(c, 1)];
    expect(first.notices).toEqual([]);
    expect(first.retraceNoise?.amplitude).toBeGreaterThan(0.002);
    expect(first.amplitude.values.get(3, 3)).toBeCloseTo(1.5 + 0.005 * (Math.sin(30) + Math.cos(48)), 6);
    expect(inspectFrame(second, c.frames[1]).map((n) => `${n.code} ${n.message}`)).toEqual([
      expect.stringMatching(/^retrace-differs amplitude \(a\.tif#1\): trace and retrace .*: trace alone$/),
    ]);
    expect(second.amplitude.values.get(3, 3)).toBeCloseTo(1.5 + 0.01 * Math.sin(30), 6);
  });
});

describe("what the user leaves out", () => {
  const EXCLUDE =
    "exclude:\n- { frame: 1, reason: tip changed }\n- { frame: 0, region_nm: [10, 12, 20, 36], reason: a speck }\n";
  test("a region and a whole frame are not measured, and it is told", async () => {
    folder.stack("a.tif", 2);
    folder.stack("t.tif", 2);
    const c = await read(stacks("{ amplitude: a.tif, topography: t.tif }") + EXCLUDE);
    const [first, second] = [await frame(c, 0), await frame(c, 1)];
    const gone = [...first.amplitude.values.data.keys()].filter((k) => Number.isNaN(first.amplitude.values.data[k]));
    expect(gone).toEqual([6, 7, 11, 12, 16, 17]); // rows 1–3, columns 1–2 of five
    expect(Number.isNaN(first.topography?.values.get(2, 2))).toBe(true);
    expect(second.amplitude.values.data.every(Number.isNaN)).toBe(true);
    expect(inspectFrame(first, c.frames[0]).map((n) => n.message)).toEqual([
      "(10, 12) to (20, 36) nm left out: a speck",
    ]);
    expect(inspectFrame(second, c.frames[1]).map((n) => n.message)).toEqual(["left out: tip changed"]);
  });

  test.each([
    ["{ frame: 2, reason: x }", /no frame 2; the cooldown has 2 frames, counted from 0/],
    ["{ frame: 0, region_nm: [20, 0, 10, 5], reason: x }", /a region from \(20, 0\) to \(10, 5\)/],
    ["{ frame: 0, region_nm: [900, 0, 1000, 5], reason: x }", /outside the frame, which reaches to \(40, 60\) nm/],
    ["{ frame: 0 }", /exclude\[0\]\.reason is missing; expected why/],
    ["{ frame: -1, reason: x }", /exclude\[0\]\.frame is -1/],
  ])("%s", async (entry, words) => {
    folder.stack("a.tif", 2);
    const found = await problemsOf(read(`${stacks("{ amplitude: a.tif }")}exclude:\n- ${entry}\n`));
    expect(found).toHaveLength(1);
    expect(found[0]).toMatch(words);
  });
});

describe("what is told though nothing stops", () => {
  test("a survey looks at the sound frames of a description with mistakes", async () => {
    folder.stack("a.tif", 2);
    folder.stack("b.tif", 3);
    const yaml = folder.text(
      "cooldown.yaml",
      `${HEAD}smple: X\n${stacks("{ amplitude: a.tif }")}- { branch: warming, stacks: { amplitude: b.tif }, temperatures_K: [1, 2] }\n`,
    );
    const survey = await surveyCooldown(yaml);
    expect(survey.cooldown).toBeNull();
    expect(survey.problems.map((p) => p.problem)).toEqual([
      expect.stringMatching(/scan is missing/),
      expect.stringMatching(/no key "smple"/),
      expect.stringMatching(/3 pages for 2 temperatures/),
    ]);
    expect(survey.frames.map((f) => f.sources.amplitude.label)).toEqual(["a.tif#0", "a.tif#1", "b.tif#0", "b.tif#1"]);
  });

  test("a file that is not what its name says is read as what it is", async () => {
    copyFileSync(join(FILES, "complex-c8.npy"), join(folder.path, "z.tif"));
    const c = await read(stacks("{ signal: z.tif }", "[180, 170, 160]"));
    expect(c.notices.map((n) => n.message)).toEqual(["z.tif is a .npy array, whatever its name says: read as that"]);
    expect((await frame(c, 1)).amplitude.values.shape).toEqual([19, 23]);
  });

  test("a topography and a phase that were swapped", async () => {
    const random = makeRandom(4);
    const noise = Float32Array.from({ length: 64 * 64 }, () => random.normal());
    const rough = (i: number, j: number): number => 3 * Math.sin(i / 5) * Math.cos(j / 3);
    folder.stack("a.tif", 1, 64, 64, (_, i, j) => 1 + (j < 32 ? 0.5 : 0) + 0.02 * (noise[64 * i + j] ?? 0));
    folder.stack("p.tif", 1, 64, 64, (_, i, j) => (j < 32 ? 0.5 : 0) + 0.03 * (noise[64 * j + i] ?? 0));
    folder.stack(
      "w.tif",
      1,
      64,
      64,
      (_, i, j) => Math.atan2(Math.sin(j / 8), Math.cos(j / 8)) + 0.01 * (noise[64 * j + i] ?? 0) * i,
    );
    folder.stack("t.tif", 1, 64, 64, (_, i, j) => rough(i, j));
    const told = async (map: string): Promise<string[]> => {
      const c = await read(stacks(map, "[180]"));
      return inspectFrame(await frame(c, 0), c.frames[0]).map((n) => n.message);
    };
    expect(await told("{ amplitude: a.tif, topography: t.tif, phase: p.tif }")).toEqual([]);
    expect(await told("{ amplitude: a.tif, topography: p.tif, phase: t.tif }")).toEqual([
      expect.stringMatching(/the topography follows the amplitude \(correlation 0\.9\d\) as a phase would/),
    ]);
    expect(await told("{ amplitude: a.tif, topography: w.tif }")).toEqual([
      expect.stringMatching(/jumps by whole turns/),
    ]);
  });
});

/** A TIFF of one page of 6 × 5 pixels with several samples each, sample k of pixel n being 10 k + n / 4 (whole numbers where of 8 bits). */
function samplesTiff(name: string, samples: number, planes: "side by side" | "in planes", bits: 8 | 32 = 32): void {
  const bytes = bits / 8;
  const data = Buffer.alloc(samples * 30 * bytes);
  for (let k = 0; k < samples; k++)
    for (let n = 0; n < 30; n++) {
      const at = bytes * (planes === "in planes" ? k * 30 + n : n * samples + k);
      if (bits === 8) data.writeUInt8(10 * k + n, at);
      else data.writeFloatLE(10 * k + 0.25 * n, at);
    }
  const extra: number[] = [];
  const dataAt = 4096;
  const strips = planes === "in planes" ? samples : 1;
  const list = (values: readonly number[]): [number, number] => {
    if (values.length === 1) return [1, values[0] ?? 0];
    const at = 1024 + 4 * extra.length;
    extra.push(...values);
    return [values.length, at];
  };
  const each = data.length / strips;
  const tags: [number, [number, number]][] = [
    [256, [1, 5]],
    [257, [1, 6]],
    [258, list(Array.from({ length: samples }, () => bits))],
    [259, [1, 1]],
    [262, [1, 1]],
    [273, list(Array.from({ length: strips }, (_, k) => dataAt + k * each))],
    [277, [1, samples]],
    [278, [1, 6]],
    [279, list(Array.from({ length: strips }, () => each))],
    [284, [1, planes === "in planes" ? 2 : 1]],
    [339, list(Array.from({ length: samples }, () => (bits === 8 ? 1 : 3)))],
  ];
  const file = Buffer.alloc(dataAt + data.length);
  file.write("II*\0", 0, "latin1");
  file.writeUInt32LE(8, 4);
  file.writeUInt16LE(tags.length, 8);
  tags.forEach(([tag, [count, value]], k) => {
    const at = 10 + 12 * k;
    file.writeUInt16LE(tag, at);
    file.writeUInt16LE(4, at + 2); // all as 32-bit whole numbers
    file.writeUInt32LE(count, at + 4);
    file.writeUInt32LE(value, at + 8);
  });
  extra.forEach((v, k) => file.writeUInt32LE(v, 1024 + 4 * k));
  data.copy(file, dataAt);
  writeFileSync(join(folder.path, name), file);
}

describe("a stack written as the samples of one page", () => {
  test("is read as pages, value for value, and said", async () => {
    samplesTiff("side.tif", 3, "side by side");
    samplesTiff("planes.tif", 3, "in planes");
    const c = await read(stacks("{ amplitude: side.tif, topography: planes.tif }", "[180, 170, 160]"));
    expect(c.notices.map((n) => `${n.code} ${n.message}`)).toEqual([
      "samples-as-pages planes.tif is one page of 3 samples a pixel: read as a stack of 3 pages",
      "samples-as-pages side.tif is one page of 3 samples a pixel: read as a stack of 3 pages",
    ]);
    for (const k of [0, 1, 2]) {
      const f = await frame(c, k);
      const want = Float32Array.from({ length: 30 }, (_, pixel) => 10 * k + 0.25 * pixel);
      expect(f.amplitude.values.data).toEqual(want);
      expect(f.topography?.values.data).toEqual(want);
    }
    expect(c.frames.map((f) => f.sources.amplitude.label)).toEqual(["side.tif#0:0", "side.tif#0:1", "side.tif#0:2"]);
    copyFileSync(join(folder.path, "side.tif"), join(folder.path, "amp.tif"));
    expect((await draftCooldown(folder.path)).files[0]?.text).toMatch(/amplitude: "amp\.tif"\n.*3 temperatures in K/);
  });

  test("where samples and temperatures differ in number, or it may be a picture, it is said once", async () => {
    samplesTiff("side.tif", 3, "side by side");
    samplesTiff("picture.tif", 3, "side by side", 8);
    fixture("samples-f4.tif");
    expect(await problemsOf(read(stacks("{ amplitude: side.tif }", "[180, 170]")))).toEqual([
      expect.stringMatching(/^side\.tif: 1 page of 3 samples a pixel for 2 temperatures \| /),
    ]);
    expect(await problemsOf(read(stacks("{ amplitude: picture.tif }", "[180, 170, 160]")))).toEqual([
      expect.stringMatching(/^picture\.tif: 1 page of 3 samples a pixel for 3 temperatures \| /),
    ]);
    expect(await problemsOf(read(stacks("{ amplitude: samples-f4.tif }")))).toEqual([
      expect.stringMatching(
        /cooldown\.yaml:\d+:\d+: amplitude is "samples-f4\.tif", which has 3 samples a pixel \| say which: "samples-f4\.tif#:0"/,
      ),
    ]);
    // What the advice says works.
    const c = await read(stacks("{ amplitude: 'samples-f4.tif#:2' }"));
    expect(c.frames[1]?.sources.amplitude).toMatchObject({ page: 1, sample: 2 });
  });
});
