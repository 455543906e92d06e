import { appendFileSync, mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterEach, beforeEach, expect, test } from "vitest";
import { refuseChangedSources, refuseOtherContent, settle } from "../../src/cli/sources.js";
import { generateStack, mergeSpec } from "../../src/demo/index.js";
import { frameDigest, hashFile, imagesDigest, loadFrame, readCooldown } from "../../src/input/index.js";
import type { Analysis } from "../../src/model/analysis.js";
import type { Cooldown } from "../../src/model/cooldown.js";
import { makeRaster } from "../../src/model/raster.js";
import { openForWriting, type Db } from "../../src/store/open.js";
import { saveAnalysis } from "../../src/store/save.js";
import { tinyCooldown } from "../../src/study/survival.js";
import { sampleAnalysis } from "../store/sample_analysis.js";

let dir: string;
let db: Db;
beforeEach(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-sources-"));
  db = openForWriting(path.join(dir, "lab.sqlite"));
});
afterEach(() => {
  db.close();
  rmSync(dir, { recursive: true, force: true });
});

/** Any analysis of a cooldown, with the digests of its real images: the store looks at nothing else of it. */
async function analysisOf(cooldown: Cooldown): Promise<Analysis> {
  const images = [];
  for (const info of cooldown.frames) images.push(await imagesDigest(cooldown, info, await loadFrame(cooldown, info)));
  const made = sampleAnalysis({ frames: cooldown.frames.length });
  return { ...made, cooldown, frames: made.frames.map((f, k) => ({ ...f, imagesSha256: images[k] })) };
}

test("a cooldown that has grown is welcome, in whatever files; one of the same name with other images is not", async () => {
  const spec = tinyCooldown("kv30-a", 1, 3);
  const first = await readCooldown(generateStack(spec, path.join(dir, "first")));
  saveAnalysis(db, await analysisOf(first), new Date("2026-01-01T00:00:00Z"));
  await expect(refuseOtherContent(db, first)).resolves.toBe(6);

  // The run went on: one more temperature at the end of the warming series.
  const grown = mergeSpec(spec, {
    series: [spec.series[0], { branch: "warming", temperaturesK: [...spec.series[1].temperaturesK, 190] }],
  });
  const longer = await readCooldown(generateStack(grown, path.join(dir, "longer")));
  expect(longer.frames).toHaveLength(7);
  await expect(refuseOtherContent(db, longer)).resolves.toBe(6);
  saveAnalysis(db, await analysisOf(longer), new Date("2026-01-02T00:00:00Z"));

  // The shorter one again would answer for the whole; other images are another cooldown.
  await expect(refuseOtherContent(db, first)).rejects.toThrow(
    /a warming frame at 190 K there, no such frame in that place among 6 here/,
  );
  const other = await readCooldown(generateStack(mergeSpec(grown, { seed: 2 }), path.join(dir, "other")));
  await expect(refuseOtherContent(db, other)).rejects.toThrow(
    /a cooling frame at 163 K with images \w{12}… there, a cooling frame at 163 K with other images here/,
  );
  const elsewhere = await readCooldown(generateStack(mergeSpec(grown, { region: "B" }), path.join(dir, "elsewhere")));
  await expect(refuseOtherContent(db, elsewhere)).rejects.toThrow(/region "A" there, region "B" here/);
});

test("a cooldown of which a frame or a region is left out later is the same cooldown", async () => {
  const yaml = generateStack(tinyCooldown("kv30-a", 1), path.join(dir, "a"));
  const whole = await readCooldown(yaml);
  saveAnalysis(db, await analysisOf(whole), new Date("2026-01-01T00:00:00Z"));
  appendFileSync(
    yaml,
    "\nexclude:\n  - { frame: 1, reason: tip changed }\n  - { frame: 2, region_nm: [0, 0, 90, 90], reason: scratch }\n",
  );
  const less = await readCooldown(yaml);
  expect([less.frames[1].excluded, less.frames[2].excludedRegions?.length]).toEqual(["tip changed", 1]);
  await expect(refuseOtherContent(db, less)).resolves.toBe(4);
  const made = await analysisOf(less);
  expect(made.frames.map((f) => f.imagesSha256)).toEqual((await analysisOf(whole)).frames.map((f) => f.imagesSha256));
  expect(saveAnalysis(db, made, new Date("2026-01-02T00:00:00Z")).id).toBe(2);
});

test("a digest is of the values: not measured is not measured, however its NaN is written; one bit more is another image", () => {
  const image = (...values: number[]) => makeRaster(Float32Array.from(values), 1, values.length, { xNm: 1, yNm: 1 });
  const odd = image(1, 2, 3);
  new Uint32Array(odd.values.data.buffer)[1] = 0x7fc12345;
  const frame = { topography: null, phase: null };
  const plain = frameDigest({ ...frame, amplitude: image(1, Number.NaN, 3) });
  expect(frameDigest({ ...frame, amplitude: odd })).toBe(plain);
  expect(frameDigest({ ...frame, amplitude: image(1, Number.NaN, 3.0000002) })).not.toBe(plain);
  expect(frameDigest({ ...frame, amplitude: image(1, 2, 3), phase: image(0, 0, 1) })).not.toBe(
    frameDigest({ topography: image(0, 0, 1), amplitude: image(1, 2, 3), phase: null }),
  );
});

test("files that have not changed are not refused; the description may be edited meanwhile", async () => {
  const yaml = generateStack(tinyCooldown("kv30-a", 1), path.join(dir, "a"));
  const cooldown = await readCooldown(yaml);
  rmSync(yaml);
  await expect(refuseChangedSources(cooldown)).resolves.toBeUndefined();
});

test("a stack that got another page under the analysis: its frames still stand; one whose pixels changed does not", async () => {
  const spec = tinyCooldown("kv30-a", 1, 3);
  const yaml = generateStack(spec, path.join(dir, "a"));
  const read = (): Promise<Cooldown> => readCooldown(yaml, { growing: true });
  const before = await read();
  const analysis = await analysisOf(before);
  expect((await settle(analysis, read))?.sources).toEqual(before.sources);

  const file = path.join(dir, "a/warming_amplitude.tif");
  appendFileSync(file, "what a longer stack has more");
  const now = await settle(analysis, read);
  expect(now?.frames).toEqual(before.frames);
  const sha = (c: Cooldown | null): string | undefined =>
    c?.sources.find((s) => s.path.endsWith("warming_amplitude.tif"))?.sha256;
  expect(sha(now)).toBe((await hashFile(file, "")).sha256);
  expect(sha(now)).not.toBe(sha(before));

  // The same frames of another sample: other pixels under the same names.
  generateStack(mergeSpec(spec, { seed: 2 }), path.join(dir, "a"));
  expect(await settle(analysis, read)).toBeNull();
});
