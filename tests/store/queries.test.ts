import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { expect, test } from "vitest";
import { migrate } from "../../src/store/migrate.js";
import { planRemoval, remove } from "../../src/store/forget.js";
import { openForReading, openForWriting, type Db } from "../../src/store/open.js";
import {
  hasPictures,
  readDriftPairs,
  readFringeBins,
  readPreview,
  readProfileBins,
  readWalls,
} from "../../src/store/pictures.js";
import {
  cooldownNames,
  readCells,
  readCooldowns,
  readMap,
  readNotices,
  readTable,
  tableStatement,
  unknownCooldowns,
} from "../../src/store/read.js";
import { findAnalysis, knownCooldown, saveAnalysis } from "../../src/store/save.js";
import { TABLES, tableNamed, type ExportedTable } from "../../src/tables/columns.js";
import { sampleAnalysis } from "./sample_analysis.js";

function stored(): Db {
  const db = new Database(":memory:");
  migrate(db, ":memory:");
  const at = (minute: number): Date => new Date(Date.UTC(2026, 0, 2, 3, minute));
  saveAnalysis(db, sampleAnalysis({ name: "b" }), at(0));
  saveAnalysis(db, sampleAnalysis({ name: "a" }), at(1));
  saveAnalysis(db, sampleAnalysis({ name: "b", settings: { "walls.reachNm": 400 } }), at(2));
  saveAnalysis(db, sampleAnalysis({ name: "c", sample: "KV-15" }), at(3));
  return db;
}

test.each(TABLES.map((t) => [t.name, t] as const))(
  "%s: one analysis is read along its key; no other analysis's rows are looked at, nothing is sorted",
  (_name, table) => {
    const db = stored();
    const plan = db
      .prepare<[number], { detail: string }>(`EXPLAIN QUERY PLAN ${tableStatement(table)}`)
      .all(1)
      .map((r) => r.detail);
    expect(plan.length).toBeGreaterThan(2);
    // The one thing that may be scanned is what the step before has already narrowed down to one analysis.
    expect(plan.filter((d) => /^SCAN (?!s$)/.test(d))).toEqual([]);
    expect(plan.filter((d) => /TEMP B-TREE/.test(d))).toEqual([]);
    const base = {
      walls: "p",
      fringes: "t",
      temperature: "f",
      "domain-frames": "d",
      loops: "l",
      domains: "domain_appearance",
    };
    expect(plan.join("\n")).toMatch(
      new RegExp(`SEARCH ${base[table.name as keyof typeof base]} USING PRIMARY KEY \\(analysis_id=\\?`),
    );
  },
);

test.each(TABLES.map((t) => [t.name, t] as const))(
  "%s: the same rows in the same order as its view",
  (_name, table) => {
    const db = stored();
    const columns = table.columns.map((c) => c.name).join(", ");
    const view = (where: string): unknown[] =>
      db.prepare(`SELECT ${columns} FROM ${where} ORDER BY ${table.orderBy.join(", ")}`).all();
    expect([...readTable(db, table)]).toEqual(view(table.view));
    expect([...readTable(db, table, { cooldowns: ["c", "b"] })]).toEqual(
      view(`${table.view} WHERE cooldown IN ('b', 'c')`),
    );
    expect([...readTable(db, table, { sample: "KV-15" })]).toEqual(view(`${table.view} WHERE cooldown = 'c'`));
    expect([...readTable(db, table, { analysis: 1 })]).toEqual(view(`${table.view}_all WHERE analysis = 1`));
    expect([...readTable(db, table, { analysis: 1, cooldowns: ["a"] })]).toEqual([]);
  },
);

test("some columns, or bare cells, are the same values as whole rows", () => {
  const db = stored();
  for (const table of TABLES) {
    const names = table.columns.map((c) => c.name);
    const rows = [...readTable(db, table)];
    expect(rows.length).toBeGreaterThan(0);
    expect([...readCells(db, table)]).toEqual(rows.map((r) => names.map((n) => r[n])));
    const few = [names[names.length - 1], names[0]];
    expect([...readTable(db, table, {}, few)]).toEqual(rows.map((r) => Object.fromEntries(few.map((n) => [n, r[n]]))));
  }
});

/** Every statement that `use` prepares, with its plan. */
function plansOf(db: Db, use: (db: Db) => void): { sql: string; plan: string[] }[] {
  const seen: string[] = [];
  const watched = new Proxy(db, {
    get(target, key) {
      if (key !== "prepare") return Reflect.get(target, key) as unknown;
      return (sql: string) => {
        seen.push(sql);
        return target.prepare(sql);
      };
    },
  });
  use(watched);
  return seen.map((sql) => {
    const values = Array.from(sql.matchAll(/\?/g), () => 1);
    const rows = db.prepare<unknown[], { detail: string }>(`EXPLAIN QUERY PLAN ${sql}`).all(...values);
    return { sql, plan: rows.map((r) => r.detail) };
  });
}

test("no question walks a table that grows with frames, walls or profiles: indices lead to the analysis asked for", () => {
  const db = stored();
  const plans = plansOf(db, (d) => {
    readCooldowns(d);
    readNotices(d, 1);
    cooldownNames(d);
    unknownCooldowns(d, ["a"]);
    knownCooldown(d, "a");
    findAnalysis(d, "0".repeat(64));
    readMap(d, 1, 0);
    readWalls(d, 1, 0);
    readPreview(d, 1, 0, "amplitude");
    readProfileBins(d, 1, 0, 0, 0);
    readFringeBins(d, 1, 0, 0, 0);
    readDriftPairs(d, 1);
    hasPictures(d, 1);
    for (const table of TABLES) for (const _ of readTable(d, table, { cooldowns: ["a"], sample: "KV-14" })) break;
  });
  expect(plans.length).toBeGreaterThanOrEqual(13 + 2 * TABLES.length);
  // One row a cooldown or an analysis; `b`, `na` and `newest_analysis` are those again.
  const few = /^SCAN (c|a|b|na|cooldown|analysis|newest_analysis|s)( USING .*)?$/;
  for (const { sql, plan } of plans)
    expect(
      plan.filter((d) => d.startsWith("SCAN") && !few.test(d)),
      sql,
    ).toEqual([]);
  for (const { sql, plan } of plans.filter((p) =>
    /FROM (frame|wall|preview|profile_bins|fringe_bins|drift_pair)\b/.test(p.sql),
  ))
    expect(plan.join("; "), sql).toMatch(/USING .*(PRIMARY KEY|INDEX).*\(analysis_id=\?/);
});

test("what hangs on a removed row is found by an index, whatever references it", () => {
  const db = stored();
  const tables = db.prepare<[], string>("SELECT name FROM sqlite_master WHERE type = 'table'").pluck().all();
  let references = 0;
  for (const child of tables) {
    const keys = db
      .prepare<[string], { id: number; from: string }>('SELECT id, "from" FROM pragma_foreign_key_list(?)')
      .all(child);
    for (const id of new Set(keys.map((k) => k.id))) {
      const columns = keys.filter((k) => k.id === id).map((k) => k.from);
      const plan = db
        .prepare<unknown[], { detail: string }>(
          `EXPLAIN QUERY PLAN SELECT 1 FROM ${child} WHERE ${columns.map((c) => `${c} = ?`).join(" AND ")}`,
        )
        .all(...columns.map(() => 1));
      expect(plan[0]?.detail, `${child} (${columns.join(", ")})`).toMatch(/^SEARCH/);
      references++;
    }
  }
  expect(references).toBeGreaterThan(10);
});

test("names with quotes and SQL in them are only names", () => {
  const db = stored();
  const name = `x'); DROP TABLE cooldown; --"`;
  saveAnalysis(db, sampleAnalysis({ name }), new Date("2026-02-02T00:00:00Z"));
  const rows = [...readTable(db, tableNamed("temperature") as ExportedTable, { cooldowns: [name] })];
  expect(rows.map((r) => r["cooldown"])).toEqual([name, name]);
  expect([...readTable(db, tableNamed("loops") as ExportedTable, { cooldowns: ["' OR 1=1 --"] })]).toEqual([]);
});

test("an export that is under way gives what was there when it began, and may be left half way", () => {
  const dir = mkdtempSync(path.join(tmpdir(), "coldseam-queries-"));
  const file = path.join(dir, "lab.sqlite");
  const db = openForWriting(file);
  saveAnalysis(db, sampleAnalysis({ name: "a" }), new Date("2026-01-01T00:00:00Z"));
  saveAnalysis(db, sampleAnalysis({ name: "b" }), new Date("2026-01-02T00:00:00Z"));
  const reader = openForReading(file);
  const rows = readTable(reader, tableNamed("temperature") as ExportedTable);
  const seen = [rows.next().value?.["cooldown"]];
  remove(db, planRemoval(db, "b", null));
  saveAnalysis(db, sampleAnalysis({ name: "c" }), new Date("2026-01-03T00:00:00Z"));
  // Reading something else on the same connection in between is allowed, and sees the same moment.
  expect([...readTable(reader, tableNamed("loops") as ExportedTable)].map((r) => r["cooldown"])).toEqual(["a", "b"]);
  for (const r of rows) seen.push(r["cooldown"]);
  expect(seen).toEqual(["a", "a", "b", "b"]);
  expect([...readTable(reader, tableNamed("loops") as ExportedTable)].map((r) => r["cooldown"])).toEqual(["a", "c"]);

  const left = readTable(db, tableNamed("temperature") as ExportedTable);
  left.next();
  left.return();
  expect(() => saveAnalysis(db, sampleAnalysis({ name: "d" }), new Date("2026-01-04T00:00:00Z"))).not.toThrow();
  reader.close();
  db.close();
  rmSync(dir, { recursive: true });
});
