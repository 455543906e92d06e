import { createHash } from "node:crypto";
import { existsSync, mkdtempSync, readFileSync, readdirSync, rmSync, truncateSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { afterEach, beforeAll, beforeEach, describe, expect, test } from "vitest";
import { InputError } from "../../src/model/errors.js";
import { openForChange, openForReading, openForWriting, openUntouched } from "../../src/store/open.js";
import { saveAnalysis } from "../../src/store/save.js";
import { verifyDatabase } from "../../src/store/verify.js";
import { makeRandom } from "../../src/numerics/random.js";
import { sampleAnalysis } from "./sample_analysis.js";

let dir: string;
let file: string;
let sound: Buffer;
const PAGE = 4096;

beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-damage-"));
  const made = path.join(dir, "lab.sqlite");
  const db = openForWriting(made);
  db.pragma("synchronous = OFF");
  for (let k = 0; k < 12; k++)
    saveAnalysis(db, sampleAnalysis({ name: `run ${k}`, frames: 12 }), new Date(Date.UTC(2026, 0, k + 1)));
  db.close();
  sound = readFileSync(made);
  rmSync(dir, { recursive: true, force: true });
});
beforeEach(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-damage-"));
  file = path.join(dir, "lab.sqlite");
  writeFileSync(file, sound);
});
afterEach(() => rmSync(dir, { recursive: true, force: true }));

const sha = (f: string): string => createHash("sha256").update(readFileSync(f)).digest("hex");

/** True where opening for a change was refused; then the file and its folder must be as they were. */
function refused(): boolean {
  const before = sha(file);
  try {
    openForChange(file).close();
    return false;
  } catch (e) {
    if (!(e instanceof InputError)) throw e;
    expect(e.problems[0].fix.length).toBeGreaterThan(10);
    expect(sha(file)).toBe(before);
    expect(readdirSync(dir)).toEqual(["lab.sqlite"]);
    return true;
  }
}

/** True where somebody notices: refused for writing, refused for reading, or found by verify. */
function noticed(): boolean {
  if (refused()) return true;
  let db;
  try {
    db = openForReading(file);
  } catch (e) {
    if (e instanceof InputError) return true;
    throw e;
  }
  try {
    return [...verifyDatabase(db)].some((c) => c.problems.length > 0);
  } finally {
    db.close();
  }
}

test("the sound file is not refused, and reading it leaves nothing behind", () => {
  const before = sha(file);
  expect(refused()).toBe(false);
  openForReading(file).close();
  expect(sha(file)).toBe(before);
  expect(readdirSync(dir)).toEqual(["lab.sqlite"]);
});

test("any page blotted out or filled with zeros is noticed before anything is written", () => {
  expect(sound.length / PAGE).toBeGreaterThan(30);
  const unnoticed: number[] = [];
  for (let page = 0; page < sound.length / PAGE; page++) {
    const bytes = Buffer.from(sound);
    bytes.fill(page % 2 === 0 ? 0xff : 0, page * PAGE, (page + 1) * PAGE);
    writeFileSync(file, bytes);
    if (!noticed()) unnoticed.push(page);
  }
  expect(unnoticed).toEqual([]);
});

test.each([1, 15, 16, 50, 99, 107, 512, PAGE - 1, PAGE, PAGE + 1, 5 * PAGE, 5.5 * PAGE, -PAGE, -1])(
  "cut off at byte %i (from its end where negative): refused with words, untouched",
  (at) => {
    truncateSync(file, at < 0 ? sound.length + at : at);
    expect(refused()).toBe(true);
    expect(() => {
      const db = openForReading(file);
      try {
        for (const c of verifyDatabase(db))
          if (c.problems.length > 0) throw new InputError({ at: "", problem: c.name, fix: "" });
      } finally {
        db.close();
      }
    }).toThrow(InputError);
  },
);

test("random bytes anywhere: a named refusal, or sound; never anything else", () => {
  const random = makeRandom(20);
  let refusals = 0;
  for (let n = 0; n < 60; n++) {
    const bytes = Buffer.from(sound);
    const many = 1 + random.below(40);
    for (let k = 0; k < many; k++) bytes[random.below(bytes.length)] = random.below(256);
    writeFileSync(file, bytes);
    if (refused()) refusals++;
    rmSync(`${file}-wal`, { force: true });
    rmSync(`${file}-shm`, { force: true });
  }
  expect(refusals).toBeGreaterThan(10);
});

describe("what another program has left beside the file", () => {
  test("a foreign database in write-ahead mode is refused by its first bytes; no lock file appears beside it", () => {
    rmSync(file);
    const foreign = new Database(file);
    foreign.pragma("journal_mode = WAL");
    foreign.exec("CREATE TABLE other (x); INSERT INTO other VALUES (1)");
    foreign.close();
    expect(refused()).toBe(true);
  });

  test("what a killed writer had committed to the log is there, for readers too", () => {
    // A copy of file and log, as a process that dies leaves them.
    const db = openForWriting(file);
    db.pragma("wal_autocheckpoint = 0");
    saveAnalysis(db, sampleAnalysis({ name: "last" }), new Date("2026-03-01T00:00:00Z"));
    const left = path.join(dir, "left.sqlite");
    writeFileSync(left, readFileSync(file));
    writeFileSync(`${left}-wal`, readFileSync(`${file}-wal`));
    db.close();
    const before = sha(left);
    const taken = openUntouched(left);
    expect(taken.prepare("SELECT count(*) FROM cooldown").pluck().get()).toBe(13);
    taken.close();
    expect(sha(left)).toBe(before);
    const reader = openForReading(left);
    expect(reader.prepare("SELECT count(*) FROM cooldown").pluck().get()).toBe(13);
    reader.close();
    // From now on a copy of the file alone has it too.
    expect(existsSync(`${left}-wal`)).toBe(false);
    const alone = path.join(dir, "alone.sqlite");
    writeFileSync(alone, readFileSync(left));
    const copy = openForReading(alone);
    expect(copy.prepare("SELECT count(*) FROM cooldown").pluck().get()).toBe(13);
    copy.close();
  });

  test("a log torn at any place gives whole analyses: all of the last one or nothing of it", () => {
    const db = openForWriting(file);
    db.pragma("wal_autocheckpoint = 0");
    saveAnalysis(db, sampleAnalysis({ name: "last", frames: 20 }), new Date("2026-03-01T00:00:00Z"));
    const main = readFileSync(file);
    const log = readFileSync(`${file}-wal`);
    db.close();
    const torn = path.join(dir, "torn.sqlite");
    const counts = new Set<number>();
    for (let k = 0; k <= 16; k++) {
      writeFileSync(torn, main);
      writeFileSync(`${torn}-wal`, log.subarray(0, Math.round((log.length * k) / 16)));
      rmSync(`${torn}-shm`, { force: true });
      const after = openForWriting(torn);
      expect([...verifyDatabase(after)].flatMap((c) => c.problems)).toEqual([]);
      counts.add(after.prepare<[], number>("SELECT count(*) FROM cooldown").pluck().get() ?? -1);
      after.close();
    }
    expect([...counts].sort((a, b) => a - b)).toEqual([12, 13]);
  });
});
