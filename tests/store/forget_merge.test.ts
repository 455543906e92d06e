import { createHash } from "node:crypto";
import { mkdtempSync, readFileSync, readdirSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { afterEach, beforeEach, describe, expect, test } from "vitest";
import type { Analysis } from "../../src/model/analysis.js";
import { analysisTables } from "../../src/store/analysis_tables.js";
import { planRemoval, remove } from "../../src/store/forget.js";
import { mergeInto, openSource, type MergedAnalysis } from "../../src/store/merge.js";
import { openForReading, openForWriting, type Db } from "../../src/store/open.js";
import { readTable, type Row } from "../../src/store/read.js";
import { saveAnalysis } from "../../src/store/save.js";
import { storedSources } from "../../src/store/verify_digests.js";
import { verifyDatabase } from "../../src/store/verify.js";
import { TABLES } from "../../src/tables/columns.js";
import { sampleAnalysis } from "./sample_analysis.js";

let dir: string;
const at = (name: string): string => path.join(dir, name);
beforeEach(() => (dir = mkdtempSync(path.join(tmpdir(), "coldseam-merge-test-"))));
afterEach(() => rmSync(dir, { recursive: true, force: true }));

const sha = (file: string): string => createHash("sha256").update(readFileSync(file)).digest("hex");

/** A database of these analyses, each a day after the one before, from `day` of January on. */
function make(name: string, day: number, ...analyses: Analysis[]): string {
  const db = openForWriting(at(name));
  analyses.forEach((a, k) => saveAnalysis(db, a, new Date(Date.UTC(2026, 0, day + k))));
  db.close();
  return at(name);
}

/** Every row of every exported table, all analyses. */
function everything(file: string): Row[][] {
  const db = openForReading(file);
  try {
    const ids = db.prepare<[], number>("SELECT id FROM analysis ORDER BY id").pluck().all();
    return TABLES.map((t) => ids.flatMap((analysis) => [...readTable(db, t, { analysis })]));
  } finally {
    db.close();
  }
}

function wrongIn(file: string): string[] {
  const db = openForReading(file);
  try {
    return [...verifyDatabase(db)].flatMap((c) => c.problems);
  } finally {
    db.close();
  }
}

async function merge(into: string, ...files: string[]): Promise<MergedAnalysis[]> {
  const sources = [];
  for (const f of files) sources.push(await openSource(f));
  const db = openForWriting(into);
  try {
    return mergeInto(db, sources);
  } finally {
    db.close();
    for (const s of sources) s.close();
  }
}

const idsIn = (db: Db, table: string): unknown[] =>
  db.prepare(`SELECT DISTINCT analysis_id FROM ${table}`).pluck().all();

test("every table that keeps something of an analysis is known, its parents before it", () => {
  const db = openForWriting(at("lab.sqlite"));
  const names = analysisTables(db).map((t) => t.name);
  const owners = db
    .prepare<[], { name: string; parent: string }>(
      `SELECT m.name, f."table" AS parent FROM sqlite_master m, pragma_foreign_key_list(m.name) f WHERE m.type = 'table'`,
    )
    .all();
  for (const { name, parent } of owners) {
    if (name === "analysis") continue;
    expect(names).toContain(name);
    if (parent !== "analysis")
      expect(names.indexOf(parent), `${parent} before ${name}`).toBeLessThan(names.indexOf(name));
  }
  db.close();
});

describe("forgetting", () => {
  test("one of several analyses goes, the others keep every row, and the newest left answers", () => {
    const file = make("lab.sqlite", 1, sampleAnalysis(), sampleAnalysis({ settings: { "walls.reachNm": 400 } }));
    const before = everything(file).map((rows) => rows.filter((r) => r["analysis"] === 1));
    const db = openForWriting(file);
    const planned = planRemoval(db, "hand-made", 2);
    expect(planned).toMatchObject({ whole: false, answersThen: 1, analyses: [{ id: 2, frames: 2, profiles: 2 }] });
    remove(db, planned);
    db.close();
    expect(everything(file)).toEqual(before);
    expect(wrongIn(file)).toEqual([]);
  });

  test("a cooldown goes with all it has, and its name is free again", () => {
    const file = make("lab.sqlite", 1, sampleAnalysis(), sampleAnalysis({ name: "stays", images: "c" }));
    const db = openForWriting(file);
    remove(db, planRemoval(db, "hand-made", null));
    const left = analysisTables(db).map((t) => [t.name, idsIn(db, t.name)] as const);
    expect(left.length).toBeGreaterThan(8);
    for (const [name, ids] of left)
      expect(
        ids.filter((id) => id !== 2),
        name,
      ).toEqual([]);
    for (const name of [
      "frame",
      "wall",
      "profile",
      "fringe",
      "domain",
      "domain_appearance",
      "loop",
      "source",
      "notice",
    ])
      expect(idsIn(db, name), name).toEqual([2]);
    expect(db.prepare("SELECT name FROM cooldown").pluck().all()).toEqual(["stays"]);
    expect(saveAnalysis(db, sampleAnalysis({ sample: "KV-99" }), new Date()).alreadyThere).toBe(false);
    db.close();
    expect(wrongIn(file)).toEqual([]);
  });

  test("the only analysis of a cooldown takes the cooldown with it", () => {
    const db = openForWriting(make("lab.sqlite", 1, sampleAnalysis()));
    const planned = planRemoval(db, "hand-made", 1);
    expect(planned).toMatchObject({ whole: true, answersThen: null });
    remove(db, planned);
    expect(db.prepare("SELECT count(*) FROM cooldown").pluck().get()).toBe(0);
    db.close();
  });

  test("what was added by somebody else since the question is not removed", () => {
    const file = make("lab.sqlite", 1, sampleAnalysis());
    const db = openForWriting(file);
    const planned = planRemoval(db, "hand-made", null);
    make("lab.sqlite", 5, sampleAnalysis({ settings: { "walls.reachNm": 500 } }));
    const before = everything(file);
    expect(() => remove(db, planned)).toThrow(/changed by another program meanwhile; nothing was removed/);
    db.close();
    expect(everything(file)).toEqual(before);
  });

  test("what is not there is refused with what is", () => {
    const db = openForWriting(make("lab.sqlite", 1, sampleAnalysis()));
    expect(() => planRemoval(db, "hand-maid", null)).toThrow(/no cooldown "hand-maid"/);
    expect(() => planRemoval(db, "hand-made", 7)).toThrow(/has no analysis 7/);
    db.close();
  });

  test("a failure half way removes nothing", () => {
    const file = make("lab.sqlite", 1, sampleAnalysis());
    const before = everything(file);
    const db = openForWriting(file);
    db.exec("CREATE TEMP TRIGGER stop BEFORE DELETE ON frame BEGIN SELECT raise(ABORT, 'stopped'); END");
    expect(() => remove(db, planRemoval(db, "hand-made", null))).toThrow(/stopped/);
    db.close();
    expect(everything(file)).toEqual(before);
  });
});

describe("merging", () => {
  test("cooldowns of several databases come together, value for value, under new numbers; the sources keep every byte", async () => {
    const a = make("a.sqlite", 1, sampleAnalysis({ name: "first" }), sampleAnalysis({ name: "second", images: "b" }));
    const b = make("b.sqlite", 3, sampleAnalysis({ name: "third", images: "c", frames: 5 }));
    const lab = make("lab.sqlite", 2, sampleAnalysis({ name: "own", images: "d" }));
    const digests = [sha(a), sha(b)];
    const merged = await merge(lab, a, b);
    expect(merged.map((m) => [m.cooldown, m.was, m.now, m.known])).toEqual([
      ["first", 1, 2, false],
      ["second", 2, 3, false],
      ["third", 1, 4, false],
    ]);
    const here = everything(lab);
    const there = [everything(a), everything(b)];
    TABLES.forEach((_t, k) => {
      const renumbered = [
        ...there[0][k].map((r) => ({ ...r, analysis: (r["analysis"] as number) + 1 })),
        ...there[1][k].map((r) => ({ ...r, analysis: 4 })),
      ];
      expect(here[k].filter((r) => r["analysis"] !== 1)).toEqual(renumbered);
    });
    expect(wrongIn(lab)).toEqual([]);
    expect([sha(a), sha(b)]).toEqual(digests);
    expect(readdirSync(dir).sort()).toEqual(["a.sqlite", "b.sqlite", "lab.sqlite"]);
  });

  test("the same work is kept once, however often it comes", async () => {
    const a = make("a.sqlite", 1, sampleAnalysis());
    make("b.sqlite", 9, sampleAnalysis());
    await merge(at("lab.sqlite"), a, at("b.sqlite"));
    const before = everything(at("lab.sqlite"));
    const again = await merge(at("lab.sqlite"), a);
    expect(again).toMatchObject([{ known: true, now: 1 }]);
    expect(everything(at("lab.sqlite"))).toEqual(before);
    expect(before[0]).toHaveLength(2);
  });

  test("the analysis made last answers, not the one that came last", async () => {
    const older = make("older.sqlite", 1, sampleAnalysis({ settings: { "walls.reachNm": 200 } }));
    const lab = make("lab.sqlite", 7, sampleAnalysis());
    expect(await merge(lab, older)).toMatchObject([{ now: 2, known: false }]);
    const db = openForReading(lab);
    expect([...readTable(db, TABLES[5])].map((r) => r["analysis"])).toEqual([1]);
    db.close();
  });

  test("a cooldown that has grown meets its shorter self, from either side", async () => {
    const short = make("short.sqlite", 1, sampleAnalysis({ frames: 3 }));
    const long = make("long.sqlite", 2, sampleAnalysis({ frames: 5 }));
    await merge(at("one.sqlite"), short, long);
    await merge(at("two.sqlite"), long, short);
    for (const lab of ["one.sqlite", "two.sqlite"]) {
      expect(wrongIn(at(lab))).toEqual([]);
      const db = openForReading(at(lab));
      expect([...readTable(db, TABLES[0])]).toHaveLength(5);
      db.close();
    }
  });

  test.each([
    [
      "another sample",
      { sample: "KV-99" },
      /There: sample "KV-14", 2 frames, analysed 2026-01-01; sample "KV-14". Here: sample "KV-99", 2 frames/,
    ],
    [
      "other images",
      { images: "e" },
      /a cooling frame at 160 K with images aaaaaaaaaaaa…. Here: .*; a cooling frame at 160 K with other images/,
    ],
  ])("one name, %s: refused with both shown, and nothing at all is merged", async (_what, change, words) => {
    const lab = make("lab.sqlite", 1, sampleAnalysis());
    const good = make("good.sqlite", 2, sampleAnalysis({ name: "good", images: "b" }));
    const bad = make("bad.sqlite", 3, sampleAnalysis(change));
    const before = everything(lab);
    await expect(merge(lab, good, bad)).rejects.toThrow(words);
    expect(everything(lab)).toEqual(before);
    // Two sources against each other: the message names the one that it clashes with.
    const a = make("a.sqlite", 4, sampleAnalysis());
    await expect(merge(at("new.sqlite"), a, bad)).rejects.toThrow(
      new RegExp(`other content in ${a.replaceAll(".", "\\.")}`),
    );
  });

  test("where the sources lie is kept as seen from the merged database", async () => {
    const a = make("a.sqlite", 1, sampleAnalysis());
    const deep = path.join(dir, "deep");
    rmSync(deep, { recursive: true, force: true });
    const lab = openForWriting(at("lab.sqlite"));
    const source = await openSource(a);
    mergeInto(lab, [source]);
    for (const s of storedSources(lab)) expect(path.resolve(dir, s.folder as string)).toBe("/nowhere");
    source.close();
    lab.close();
  });

  test("a source that is missing, foreign, damaged or empty is refused before the target is made", async () => {
    const foreign = new Database(at("foreign.sqlite"));
    foreign.exec("CREATE TABLE other (x)");
    foreign.close();
    writeFileSync(at("text.sqlite"), "no database at all ".repeat(40));
    writeFileSync(at("empty.sqlite"), "");
    for (const [name, words] of [
      ["missing.sqlite", /no such database/],
      ["foreign.sqlite", /not one made by coldseam/],
      ["text.sqlite", /not a sound SQLite database/],
      ["empty.sqlite", /no ingest into it was ever finished/],
    ] as const)
      await expect(openSource(at(name))).rejects.toThrow(words);
  });
});
