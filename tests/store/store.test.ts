import { createHash } from "node:crypto";
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { afterEach, beforeEach, expect, test } from "vitest";
import { InputError } from "../../src/model/errors.js";
import { openForReading, openForWriting } from "../../src/store/open.js";
import { readCooldowns, readMap, readNotices, readTable } from "../../src/store/read.js";
import { saveAnalysis, WATCHED } from "../../src/store/save.js";
import { verifyDatabase } from "../../src/store/verify.js";
import { TABLES, tableNamed, type ExportedTable } from "../../src/tables/columns.js";
import { inflateSync } from "node:zlib";
import { sampleAnalysis } from "./sample_analysis.js";

let dir: string;
let file: string;
beforeEach(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-store-"));
  file = path.join(dir, "lab.sqlite");
});
afterEach(() => rmSync(dir, { recursive: true, force: true }));

const NOW = new Date("2026-01-02T03:04:05Z");
const table = (name: string): ExportedTable => tableNamed(name) as ExportedTable;
const sha = (f: string): string => createHash("sha256").update(readFileSync(f)).digest("hex");

test("an analysis comes back with the values that went in, and nothing where there is nothing", () => {
  const db = openForWriting(file);
  saveAnalysis(db, sampleAnalysis(), NOW);
  const [first, second] = [...readTable(db, table("temperature"))];
  expect(first).toMatchObject({
    cooldown: "hand-made",
    branch: "cooling",
    frame: 0,
    temperature_K: 160,
    metallic_fraction: 0.5,
    metallic_domains: 1,
    insulating_domains: 1,
    profiles: 2,
    unresolved_share: 0.5,
    fringe_share: 1,
    flag: "",
    temperature_sd_K: null,
    lag_shift_K: null,
    amplitude_noise_relative: 0.05,
    phase_noise_rad: 0.0625,
    topography_noise_nm: null,
    noise_by_retrace: "amplitude phase",
  });
  expect(second).toMatchObject({
    metallic_fraction: null,
    drift_x_nm: null,
    metallic_domains: null,
    flag: "undecided not-placed",
    temperature_sd_K: 0.028867513459481287,
    ramp_K_per_s: 1 / 6000,
    lag_shift_K: -0.005,
  });
  const walls = [...readTable(db, table("walls"))];
  expect(walls).toHaveLength(2);
  expect(walls[0]).toMatchObject({ width_nm: 84.25, resolved: 1, tip_resolution_nm: 30, x_nm: 100 });
  expect(walls[1]).toMatchObject({ width_nm: null, resolved: 0, width_upper95_nm: 25 });
  expect([...readTable(db, table("domains"))][1]).toMatchObject({
    kind: "insulating",
    fate: "vanished",
    largest_area_nm2: 360,
  });
  expect([...readTable(db, table("loops"))][0]).toMatchObject({
    cooling_half_K: 160,
    warming_half_K: null,
    complete: 0,
  });
  expect(readNotices(db, 1)).toEqual([{ frame: 1, code: "drift-failed", message: "could not be placed" }]);
  const map = readMap(db, 1, 0);
  expect([...inflateSync(map?.deflated as Uint8Array)]).toEqual([0, 0, 1, 0, 1, 255]);
  db.close();
});

test("every exported table is a view of its name whose columns are the exported ones, in order", () => {
  const db = openForWriting(file);
  for (const t of TABLES) {
    const columns = db.prepare<[], { name: string }>(`SELECT name FROM pragma_table_info('${t.view}')`).all();
    expect(columns.map((c) => c.name)).toEqual(t.columns.map((c) => c.name));
  }
  db.close();
});

test("the same work is stored once; other settings stand beside it, and the newest answers", () => {
  const db = openForWriting(file);
  expect(saveAnalysis(db, sampleAnalysis(), NOW)).toEqual({ id: 1, alreadyThere: false });
  expect(saveAnalysis(db, sampleAnalysis(), NOW)).toEqual({ id: 1, alreadyThere: true });
  expect(saveAnalysis(db, sampleAnalysis({ settings: { "walls.reachNm": 400 } }), NOW)).toEqual({
    id: 2,
    alreadyThere: false,
  });
  expect([...readTable(db, table("loops"))].map((r) => r["analysis"])).toEqual([2]);
  expect([...readTable(db, table("loops"), { analysis: 1 })].map((r) => r["analysis"])).toEqual([1]);
  expect(readCooldowns(db)).toMatchObject([{ cooldown: "hand-made", analyses: 2, analysis: 2, frames: 2 }]);
  db.close();
});

test("a name that stands for another sample is refused, and what is stored stays", () => {
  const db = openForWriting(file);
  saveAnalysis(db, sampleAnalysis(), NOW);
  expect(() => saveAnalysis(db, sampleAnalysis({ sample: "other" }), NOW)).toThrow(
    /sample "KV-14" there, sample "other" here/,
  );
  expect(readCooldowns(db)).toHaveLength(1);
  db.close();
});

test("an analysis made while the run went on takes the place of those like it, and of no other", () => {
  const db = openForWriting(file);
  const watched = (change: Parameters<typeof sampleAnalysis>[0]) => {
    const a = sampleAnalysis(change);
    return { ...a, notices: [...a.notices, { frame: null, code: WATCHED, message: "the run goes on" }] };
  };
  const ids = (): number[] => db.prepare<[], number>("SELECT id FROM analysis ORDER BY id").pluck().all();
  saveAnalysis(db, sampleAnalysis(), NOW);
  saveAnalysis(db, watched({ frames: 3 }), NOW);
  saveAnalysis(db, watched({ frames: 3, settings: { "walls.reachNm": 400 } }), NOW);
  saveAnalysis(db, watched({ name: "other", frames: 3 }), NOW);
  expect(ids()).toEqual([1, 2, 3, 4]);
  // Frames that were corrected meanwhile are no contradiction to what is replaced, but they are to what stays.
  const corrected = watched({ frames: 4 });
  const frames = corrected.cooldown.frames.map((f) => (f.frame === 0 ? { ...f, temperatureK: 161 } : f));
  expect(() => saveAnalysis(db, { ...corrected, cooldown: { ...corrected.cooldown, frames } }, NOW)).toThrow(
    /with other content/,
  );
  expect(ids()).toEqual([1, 2, 3, 4]);
  expect(saveAnalysis(db, watched({ frames: 4 }), NOW)).toEqual({ id: 5, alreadyThere: false });
  expect(ids()).toEqual([1, 3, 4, 5]);
  const other = watched({ name: "other", sample: "KV-15", frames: 4, images: "b" });
  expect(saveAnalysis(db, other, NOW)).toEqual({ id: 6, alreadyThere: false });
  expect(ids()).toEqual([1, 3, 5, 6]);
  expect(readCooldowns(db)).toMatchObject([
    { cooldown: "hand-made", sample: "KV-14" },
    { cooldown: "other", sample: "KV-15" },
  ]);
  expect([...verifyDatabase(db)].flatMap((c) => c.problems)).toEqual([]);
  db.close();
});

test("a failure inside the transaction leaves nothing behind", () => {
  const db = openForWriting(file);
  const broken = sampleAnalysis();
  const nan = { ...broken, frames: broken.frames.map((f, k) => (k === 1 ? { ...f, gain: Number.NaN } : f)) };
  expect(() => saveAnalysis(db, nan, NOW)).toThrow("frame.gain is NaN");
  for (const name of ["cooldown", "analysis", "frame", "profile"])
    expect(db.prepare(`SELECT count(*) AS n FROM ${name}`).get()).toEqual({ n: 0 });
  db.close();
});

test("the schema refuses what the contract forbids", () => {
  const db = openForWriting(file);
  saveAnalysis(db, sampleAnalysis(), NOW);
  expect(() => db.exec("UPDATE profile SET width_nm = NULL WHERE resolved = 1")).toThrow(/CHECK/);
  expect(() => db.exec("UPDATE profile SET width_upper95_nm = NULL WHERE resolved = 0")).toThrow(/CHECK/);
  expect(() => db.exec("UPDATE frame SET metallic_fraction = 1.5 WHERE frame = 0")).toThrow(/CHECK/);
  expect(() => db.exec("UPDATE frame SET metallic_fraction = 'half' WHERE frame = 0")).toThrow(/REAL|TEXT/);
  expect(() => db.exec("INSERT INTO wall VALUES (1, 77, 0, 0, 1.0, x'00')")).toThrow(/FOREIGN KEY/);
  db.close();
});

test("a foreign database and a file that is none are refused with words and left as they are", () => {
  const foreign = new Database(file);
  foreign.exec("CREATE TABLE other (x)");
  foreign.close();
  const text = path.join(dir, "notes.sqlite");
  writeFileSync(text, "this is not a database, but it is long enough to be looked at ".repeat(20));
  for (const [f, words] of [
    [file, "not one made by coldseam"],
    [text, "not a sound SQLite database"],
  ] as const) {
    const before = sha(f);
    expect(() => openForWriting(f)).toThrow(words);
    expect(() => openForReading(f)).toThrow(words);
    expect(sha(f)).toBe(before);
  }
});

test("a database of a newer schema is refused", () => {
  openForWriting(file).close();
  const db = new Database(file);
  db.pragma("user_version = 9999");
  db.pragma("journal_mode = DELETE");
  db.close();
  const before = sha(file);
  expect(() => openForWriting(file)).toThrow(/schema version 9999, newer/);
  expect(sha(file)).toBe(before);
});

test("reading a database that is not there says so and makes no file", () => {
  expect(() => openForReading(path.join(dir, "none.sqlite"))).toThrow(InputError);
  expect(() => readFileSync(path.join(dir, "none.sqlite"))).toThrow(/ENOENT/);
});
