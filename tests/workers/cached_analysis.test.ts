import { mkdtempSync, readFileSync, readdirSync, rmSync, statSync, truncateSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, beforeEach, expect, test } from "vitest";
import { analyse } from "../../src/analyse.js";
import { defaultSpec, generateStack } from "../../src/demo/index.js";
import { readCooldown } from "../../src/input/index.js";
import type { Cooldown } from "../../src/model/cooldown.js";
import { settingsWith } from "../../src/settings.js";
import { cacheSize } from "../../src/workers/cache_folder.js";
import { contentKey } from "../../src/workers/content_key.js";

let dir: string;
let yaml: string;
let cooldown: Cooldown;
let folder: string;
let plain: string;
let runs = 0;

interface Options {
  readonly set?: readonly string[];
  readonly limitBytes?: number;
  readonly workers?: number;
  readonly onStage?: (stage: string) => void;
  readonly of?: Cooldown;
}

/** Key of everything that an analysis found, to the bit; what it said of the cache. */
async function run(cache: boolean, o: Options = {}): Promise<{ found: string; troubles: string[] }> {
  const troubles: string[] = [];
  const {
    settings: _,
    cooldown: _c,
    release,
    ...analysis
  } = await analyse(o.of ?? cooldown, {
    settings: settingsWith(o.set),
    programVersion: "test",
    workers: o.workers ?? 0,
    ...(o.onStage === undefined ? {} : { onStage: o.onStage }),
    cache: cache ? { folder, limitBytes: o.limitBytes ?? 1e9 } : undefined,
    onCacheTrouble: (t) => troubles.push(t),
  });
  const found = contentKey(analysis);
  release?.();
  return { found, troubles };
}

const entries = (): string[] =>
  readdirSync(folder)
    .filter((f) => /-[0-9a-f]{64}$/.test(f))
    .sort();
const kinds = (names: readonly string[]): string[] => [...new Set(names.map((f) => f.split("-")[0]))].sort();
/** The stages whose results were made, and not found. */
async function made(o: Options): Promise<string[]> {
  const before = new Set(entries());
  await run(true, o);
  return kinds(entries().filter((f) => !before.has(f)));
}

beforeAll(async () => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-cached-"));
  const spec = defaultSpec({
    cooldown: "cached",
    rows: 80,
    cols: 80,
    seed: 7,
    domains: { scaleNm: 140 },
    wall: { widthNm: 70 },
    series: [
      { branch: "cooling", temperaturesK: [180, 154, 125] },
      { branch: "warming", temperaturesK: [127, 160, 185] },
    ],
    drift: { stepSdNm: 25, jumpNm: 100, limitNm: 100 },
  });
  yaml = generateStack(spec, path.join(dir, "run"));
  cooldown = await readCooldown(yaml);
  plain = (await run(false)).found;
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));
beforeEach(() => (folder = path.join(dir, `${runs++}.cache`)));

test("cold, warm, and with any number of threads: the same to the bit; warm nothing is made or written", async () => {
  expect(await run(true)).toEqual({ found: plain, troubles: [] });
  const stages = ["clean", "debris", "domains", "fringes", "histories", "levels", "map", "pairs", "previews"];
  const before = entries();
  expect(kinds(before)).toEqual([...stages, "raster", "signal", "walls"]);
  expect(await run(true)).toEqual({ found: plain, troubles: [] });
  expect(await run(true, { workers: 2 })).toEqual({ found: plain, troubles: [] });
  expect(entries().length).toBe(before.length);
});

test("a changed setting repeats its own stage and what follows from it, and none before", async () => {
  await run(true);
  expect(await made({ set: ["loops.draws=300"] })).toEqual([]);
  expect(await made({ set: ["domains.leastPixels=7"] })).toEqual(["domains", "histories"]);
  expect(await made({ set: ["fringes.reachNm=500"] })).toEqual(["fringes"]);
  const ofWalls = await made({ set: ["walls.reachNm=310"] });
  expect(ofWalls).toEqual(expect.arrayContaining(["fringes", "walls"]));
  for (const early of ["clean", "debris", "levels", "map", "pairs", "previews", "raster", "signal"])
    expect(ofWalls).not.toContain(early);
  const ofDrift = await made({ set: ["drift.huber=1.5"] });
  expect(ofDrift).toContain("pairs");
  for (const early of ["clean", "raster"]) expect(ofDrift).not.toContain(early);
  expect(await made({ set: ["clean.scarSigmas=4.4"] })).toEqual(expect.arrayContaining(["clean", "raster", "pairs"]));
});

test("with a changed setting the results are those of a run without a cache", async () => {
  await run(true);
  for (const set of [["fringes.reachNm=500"], ["states.contrastScatter=0.02"], ["drift.huber=1.5"], ["run.seed=5"]]) {
    const alone = (await run(false, { set })).found;
    expect((await run(true, { set })).found).toBe(alone);
  }
});

test("entries deleted, cut off or spoilt are made again", async () => {
  await run(true);
  entries().forEach((f, k) => {
    const file = path.join(folder, f);
    if (k % 5 === 0) rmSync(file);
    else if (k % 5 === 1) truncateSync(file, Math.floor(statSync(file).size / 2));
    else if (k % 5 === 2) {
      const bytes = readFileSync(file);
      bytes[60] ^= 1;
      writeFileSync(file, bytes);
    }
  });
  expect(await run(true)).toEqual({ found: plain, troubles: [] });
  // Rasters alone, results alone.
  for (const gone of [/^(raster|signal)-/, /^(clean|map|walls|levels)-/]) {
    for (const f of entries()) if (gone.test(f)) rmSync(path.join(folder, f));
    expect(await run(true)).toEqual({ found: plain, troubles: [] });
    const set = ["fringes.reachNm=520"];
    expect((await run(true, { set })).found).toBe((await run(false, { set })).found);
  }
});

test.each(["placing", "debris", "levels", "measuring", "histories"])(
  "deleted while %s begins: said once",
  async (at) => {
    const r = await run(true, { onStage: (s) => s === at && rmSync(folder, { recursive: true }) });
    expect(r.found).toBe(plain);
    expect(r.troubles.length).toBe(1);
  },
);

test("two analyses at once share a folder", async () => {
  const both = await Promise.all([run(true, { workers: 1 }), run(true, { workers: 1 })]);
  expect(both.map((r) => r.found)).toEqual([plain, plain]);
  expect(await made({})).toEqual([]);
});

test("a small limit is kept: rasters first go without, then all", async () => {
  expect(await run(true, { limitBytes: 3e6 })).toEqual({ found: plain, troubles: [] });
  expect(kinds(entries())).not.toContain("raster");
  expect(cacheSize(folder).bytes).toBeLessThanOrEqual(3e6);
  const set = ["fringes.reachNm=500"];
  expect(await made({ set, limitBytes: 3e6 })).toEqual(["fringes"]);
  const r = await run(true, { limitBytes: 100 });
  expect(r).toEqual({
    found: plain,
    troubles: [expect.stringMatching(/^nothing is added, as the limit is too small: .* allows 0\.0001$/)],
  });
  expect(entries()).toEqual([]);
});

test("a run that has grown does again only what its new frames change", async () => {
  const text = readFileSync(yaml, "utf8").replace("[127, 160, 185]", "[127, 160]");
  const shorter = path.join(path.dirname(yaml), "shorter.yaml");
  writeFileSync(shorter, text);
  const read = await readCooldown(shorter).catch(() => null);
  // A stack must have a temperature for each page: as many as the run had planned.
  if (read === null) writeFileSync(shorter, text.replace("[127, 160]", "[127, 160, 186]"));
  const of = read ?? (await readCooldown(shorter));
  await run(true, { of });
  const cleaned = entries().filter((f) => f.startsWith("clean-")).length;
  expect(await run(true)).toMatchObject({ found: plain });
  expect(entries().filter((f) => f.startsWith("clean-")).length - cleaned).toBeLessThanOrEqual(1);
});
