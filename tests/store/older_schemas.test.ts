import { createHash } from "node:crypto";
import { existsSync, mkdirSync, mkdtempSync, readFileSync, readdirSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { afterEach, beforeEach, describe, expect, test } from "vitest";
import { mergeInto, openSource } from "../../src/store/merge.js";
import { APPLICATION_ID, newestVersion } from "../../src/store/migrate.js";
import { openForReading, openForWriting } from "../../src/store/open.js";
import { verifyDatabase } from "../../src/store/verify.js";
import { TABLES } from "../../src/tables/columns.js";

const FOLDER = "fixtures/databases";
const kept = readdirSync(FOLDER)
  .map((f) => /^schema-(\d+)\.sql$/.exec(f))
  .filter((m) => m !== null)
  .map((m) => Number(m[1]));

let dir: string;
let file: string;
beforeEach(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-schema-"));
  file = path.join(dir, "old.sqlite");
});
afterEach(() => rmSync(dir, { recursive: true, force: true }));

const sha = (f: string): string => createHash("sha256").update(readFileSync(f)).digest("hex");

function load(version: number): void {
  const db = new Database(file);
  db.exec(readFileSync(path.join(FOLDER, `schema-${version}.sql`), "utf8"));
  db.pragma(`user_version = ${version}`);
  db.pragma(`application_id = ${APPLICATION_ID}`);
  db.close();
}

type Content = { columns: string[]; rows: unknown[] }[];

/** The exported tables over all analyses, in the columns that this schema knows. */
function content(f: string, columnsOf: Content | null): Content {
  const db = new Database(f, { readonly: true });
  try {
    return TABLES.map((t, k) => {
      const columns =
        columnsOf?.[k].columns ??
        db.prepare<[], string>(`SELECT name FROM pragma_table_info('${t.view}_all')`).pluck().all();
      return {
        columns,
        rows: db
          .prepare(`SELECT ${columns.join(", ")} FROM ${t.view}_all ORDER BY ${t.orderBy.join(", ")}`)
          .raw()
          .all(),
      };
    });
  } finally {
    db.close();
  }
}

function wrongIn(f: string): string[] {
  const db = openForReading(f);
  try {
    return [...verifyDatabase(db)].flatMap((c) => c.problems);
  } finally {
    db.close();
  }
}

test("every schema before this one is kept as a fixture, from the first on", () => {
  for (let v = 1; v < newestVersion(); v++) expect(kept).toContain(v);
});

describe.each(kept.filter((v) => v < newestVersion()))("a database of schema %i", (version) => {
  test("is brought up with every value, a copy as it was beside it", () => {
    load(version);
    const before = content(file, null);
    expect(before.every((t) => t.rows.length > 0)).toBe(true);
    expect(() => openForReading(file)).toThrow(`schema version ${version}, this program reads version`);
    openForWriting(file).close();
    expect(content(file, before)).toEqual(before);
    expect(wrongIn(file)).toEqual([]);
    const copy = `${file}.schema-${version}.bak`;
    expect(content(copy, null)).toEqual(before);
    const db = new Database(copy, { readonly: true });
    expect(db.pragma("user_version", { simple: true })).toBe(version);
    expect(db.pragma("application_id", { simple: true })).toBe(APPLICATION_ID);
    db.close();
    expect(readdirSync(dir).sort()).toEqual(["old.sqlite", path.basename(copy)]);
  });

  test("the temperature's spread, ramp and lag come from the description, where it has them; of the noise there is nothing", () => {
    load(version);
    openForWriting(file).close();
    const db = new Database(file, { readonly: true });
    const rows = db
      .prepare<[], Record<string, number | null>>(
        `SELECT frame, temperature_sd_K, ramp_K_per_s, lag_shift_K, phase_noise_rad, noise_by_retrace FROM temperature_all
         WHERE analysis = 1 ORDER BY frame`,
      )
      .raw()
      .all();
    db.close();
    const second = version < 3 ? [null, null, null] : [0.028867513459481287, 1 / 6000, -0.005];
    expect(rows).toEqual([
      [0, null, null, null, null, null],
      [1, ...second, null, null],
    ]);
  });

  test("stays as it was where its copy cannot be written", () => {
    load(version);
    const before = content(file, null);
    // A folder of the copy's name, with something in it: nothing can be put in its place.
    const copy = `${file}.schema-${version}.bak`;
    mkdirSync(copy);
    writeFileSync(path.join(copy, "something"), "");
    expect(() => openForWriting(file)).toThrow(/schema-\d+\.bak/);
    expect(content(file, null)).toEqual(before);
    const db = new Database(file, { readonly: true });
    expect(db.pragma("user_version", { simple: true })).toBe(version);
    db.close();
    expect(readdirSync(dir).filter((f) => f.endsWith(".part"))).toEqual([]);
  });

  test("is merged from a copy, and keeps every byte itself", async () => {
    load(version);
    const before = sha(file);
    const lab = path.join(dir, "lab.sqlite");
    const source = await openSource(file);
    const db = openForWriting(lab);
    expect(mergeInto(db, [source]).every((m) => !m.known)).toBe(true);
    db.close();
    source.close();
    expect(sha(file)).toBe(before);
    expect(wrongIn(lab)).toEqual([]);
    expect(existsSync(`${file}.schema-${version}.bak`)).toBe(false);
  });
});
