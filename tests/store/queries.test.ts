import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { expect, test } from "vitest";
import { migrate } from "../../src/store/migrate.js";
import { planRemoval, remove } from "../../src/store/forget.js";
import { openForReading, openForWriting, type Db } from "../../src/store/open.js";
import { readTable, tableStatement } from "../../src/store/read.js";
import { saveAnalysis } from "../../src/store/save.js";
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
