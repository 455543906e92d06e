import { chmodSync, existsSync, mkdtempSync, readdirSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, afterEach, beforeAll, beforeEach, describe, expect, test, vi } from "vitest";
import { defaultSpec, generateStack } from "../../src/demo/index.js";
import { writeEntry } from "../../src/workers/cache_entry.js";
import { openCache } from "../../src/workers/cache_folder.js";
import { asOther, coldseam, MAY_BE_OTHER } from "./program.js";

let dir: string;
let yaml: string;
let db: string;
beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-cache-cli-"));
  db = path.join(dir, "lab.sqlite");
  const spec = defaultSpec({
    cooldown: "kept",
    rows: 64,
    cols: 64,
    seed: 3,
    series: [{ branch: "cooling", temperaturesK: [180, 155, 125] }],
  });
  yaml = generateStack(spec, path.join(dir, "run"));
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

const ingest = (...more: string[]) => coldseam("ingest", yaml, "--db", db, "--workers", "1", ...more);
const folder = (): string => `${db}.cache`;

test("an ingest keeps its stages beside the database; `cache` says how much, and deletes it", () => {
  const first = ingest();
  expect(first.code, first.err).toBe(0);
  expect(coldseam("cache", "--db", db).out).toMatch(/: \d+\.\d MB in \d+ files; --clear deletes it/);
  const before = readdirSync(folder()).length;
  expect(ingest("--set", "loops.draws=500").code).toBe(0);
  expect(readdirSync(folder()).length).toBe(before);
  expect(coldseam("cache", "--db", db, "--clear").out).toMatch(/: \d+\.\d MB in \d+ files deleted\n$/);
  expect(existsSync(folder())).toBe(false);
  for (const more of [[], ["--clear"]])
    expect(coldseam("cache", "--db", db, ...more).out).toBe(`${folder()}: nothing is kept\n`);
  // Nothing is lost with it, and without it things go on as before.
  expect(coldseam("verify", "--db", db).code).toBe(0);
  expect(ingest("--set", "loops.draws=501", "--no-cache").code).toBe(0);
  expect(existsSync(folder())).toBe(false);
  expect(ingest("--set", "loops.draws=502", "--cache-mb", "0")).toMatchObject({
    code: 0,
    err: expect.stringMatching(
      /note: cache: nothing is added, as the limit is too small: this cooldown needs about 2 MB, .* --cache-mb allows 0\n/,
    ) as string,
  });
});

test("numbers that are none stop an ingest, an empty one too", () => {
  for (const [option, text] of [
    ["--cache-mb", "much"],
    ["--cache-mb", ""],
    ["--cache-mb", " "],
    ["--workers", ""],
  ])
    expect(coldseam("ingest", yaml, "--db", db, option, text), `${option} "${text}"`).toMatchObject({
      code: 2,
      err: expect.stringMatching(`${option} (much|""): expected a .*number`) as string,
    });
});

test("where there is neither database nor cache, that is an error that names the file", () => {
  for (const more of [[], ["--clear"]])
    expect(coldseam("cache", "--db", path.join(dir, "nope.sqlite"), ...more)).toMatchObject({
      code: 1,
      out: "",
      err: expect.stringMatching(/nope\.sqlite: no such database\n {2}fix: /) as string,
    });
});

describe.runIf(MAY_BE_OTHER)("a cache that this user may not", () => {
  const owned = (): string => `${path.join(dir, "owned.sqlite")}.cache`;
  const cache = (...more: string[]) => asOther("cache", "--db", path.join(dir, "owned.sqlite"), ...more);
  beforeEach(() => {
    chmodSync(dir, 0o777);
    openCache(owned(), 1e9, { rasters: 0, small: 0 });
    for (const k of [1, 2]) writeEntry(owned(), `map-${String(k).repeat(64)}`, new Uint8Array(400_000));
  });
  afterEach(() => {
    chmodSync(owned(), 0o755);
    rmSync(owned(), { recursive: true });
  });

  test.each([0o000, 0o444])("read (%i) is not called empty, nor deleted", (mode) => {
    chmodSync(owned(), mode);
    const why = "this user has no permission \\(EACCES\\)";
    expect(cache()).toMatchObject({
      code: 1,
      out: "",
      err: expect.stringMatching(`owned\\.sqlite\\.cache: cannot be read, .*: ${why}\n  fix: `) as string,
    });
    expect(cache("--clear")).toMatchObject({
      code: 1,
      out: "",
      err: expect.stringMatching(`owned\\.sqlite\\.cache: cannot be read, .* not deleted: ${why}\n  fix: `) as string,
    });
  });

  test("write: what could not be deleted is said, and an ingest says that it keeps nothing", () => {
    chmodSync(owned(), 0o555);
    expect(cache()).toMatchObject({ code: 0, out: expect.stringMatching(/: 0\.8 MB in 2 files;/) as string });
    expect(cache("--clear")).toMatchObject({
      code: 1,
      out: "",
      err: expect.stringMatching(/: 0\.8 MB in 2 files could not be deleted: .*\(EACCES\)\n {2}fix: /) as string,
    });
    const r = asOther("ingest", yaml, "--db", path.join(dir, "owned.sqlite"), "--workers", "1");
    rmSync(path.join(dir, "owned.sqlite"), { force: true });
    expect(r.code, r.err).toBe(0);
    expect(r.err).toContain(
      `note: cache: nothing of this run is kept in ${owned()}: this user has no permission (EACCES); make the folder writable, or use --no-cache\n`,
    );
    expect(r.err).not.toMatch(/next ingest;|part-/);
  });
});

test("a second identical ingest costs the hashing of its files: no stage is even loaded", async () => {
  const { ingest: again } = await import("../../src/cli/ingest.js");
  // The analysis was stored by the test before.
  vi.doMock("../../src/analyse.js", () => {
    throw new Error("the stages were loaded");
  });
  const out = vi.spyOn(process.stdout, "write").mockReturnValue(true);
  try {
    expect(await again(yaml, { db })).toBe(1);
    expect(String(out.mock.calls[0]?.[0])).toMatch(/already in .* as analysis 1/);
    // The same test must fail where work is to be done.
    await expect(again(yaml, { db, set: ["loops.draws=503"] })).rejects.toThrow();
  } finally {
    out.mockRestore();
    vi.doUnmock("../../src/analyse.js");
  }
  expect(existsSync(folder()) && readdirSync(folder()).length > 1).toBe(false);
});
