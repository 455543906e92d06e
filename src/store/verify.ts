import Database from "better-sqlite3";
import { TABLES } from "../tables/columns.js";
import { APPLICATION_ID, migrations, schemaVersion } from "./migrate.js";
import type { Db } from "./open.js";
import { digestProblems } from "./verify_digests.js";
import { mapProblems, wallProblems } from "./verify_images.js";
import { PLACES, RULES } from "./verify_rules.js";

/** What one check of a database found. */
export interface Check {
  readonly name: string;
  /** How many things were looked at: rows, maps, files. */
  readonly looked: number;
  readonly of: string;
  readonly problems: readonly string[];
}

/** Looks at a database from outside, changing nothing: SQLite's own checks, the schema, and what the numbers owe each other. A check
 *  that a damaged file stops says so and the others go on. */
export function* verifyDatabase(db: Db): Generator<Check> {
  yield tried("SQLite's integrity check", "database", () => sqliteProblems(db));
  yield tried("foreign keys", "tables", () => foreignKeyProblems(db));
  yield tried("tables and views are those of this schema", "objects", () => schemaProblems(db));
  yield tried("each view has the exported columns", "views", () => columnProblems(db));
  for (const rule of RULES)
    yield tried(rule.name, rule.of, () => ({
      looked: Number(db.prepare(`SELECT count(*) FROM ${rule.from}`).pluck().get()),
      problems: db.prepare<[], string>(`WITH ${PLACES} ${rule.wrong}`).pluck().all(),
    }));
  yield tried("maps unpack to their pixels, and hold the domains counted", "maps", () => mapProblems(db));
  yield tried("lines of the walls have their length", "walls", () => wallProblems(db));
  yield tried("what is described gives the digests stored", "analyses", () => digestProblems(db));
}

interface Found {
  readonly looked: number;
  readonly problems: readonly string[];
}

function tried(name: string, of: string, look: () => Found): Check {
  try {
    return { name, of, ...look() };
  } catch (e) {
    return {
      name,
      of,
      looked: 0,
      problems: [`could not be looked at: ${e instanceof Error ? e.message : String(e)}`],
    };
  }
}

function sqliteProblems(db: Db): Found {
  const found = db.prepare<[], string>("PRAGMA integrity_check").pluck().all();
  return { looked: 1, problems: found.filter((line) => line !== "ok") };
}

function foreignKeyProblems(db: Db): Found {
  const broken = db
    .prepare<[], { table: string; parent: string; n: number }>(
      `SELECT "table", parent, count(*) AS n FROM pragma_foreign_key_check GROUP BY 1, 2`,
    )
    .all();
  return {
    looked: Number(db.prepare("SELECT count(*) FROM sqlite_master WHERE type = 'table'").pluck().get()),
    problems: broken.map((b) => `${b.n} rows of ${b.table} have no row in ${b.parent}`),
  };
}

interface SchemaObject {
  readonly name: string;
  readonly sql: string;
}

/** Tables, indices and views as the migrations make them, by name. */
function objectsOf(db: Db): Map<string, string> {
  const rows = db
    .prepare<[], SchemaObject>("SELECT name, sql FROM sqlite_master WHERE sql IS NOT NULL AND name NOT LIKE 'sqlite_%'")
    .all();
  return new Map(rows.map((r) => [r.name, r.sql]));
}

function schemaProblems(db: Db): Found {
  const fresh = new Database(":memory:");
  try {
    const version = schemaVersion(db);
    for (const m of migrations()) if (m.version <= version) fresh.exec(m.sql);
    const wanted = objectsOf(fresh);
    const there = objectsOf(db);
    const problems: string[] = [];
    if (Number(db.pragma("application_id", { simple: true })) !== APPLICATION_ID)
      problems.push("the file is not marked as coldseam's");
    for (const [name, sql] of wanted)
      if (there.get(name) !== sql) problems.push(`${name} ${there.has(name) ? "was changed" : "is missing"}`);
    for (const name of there.keys()) if (!wanted.has(name)) problems.push(`${name} is not part of the schema`);
    return { looked: wanted.size, problems };
  } finally {
    fresh.close();
  }
}

function columnProblems(db: Db): Found {
  const problems: string[] = [];
  const columns = db.prepare<[string], string>("SELECT name FROM pragma_table_info(?)").pluck();
  for (const t of TABLES) {
    const wanted = t.columns.map((c) => c.name).join(", ");
    for (const view of [t.view, `${t.view}_all`]) {
      const there = columns.all(view).join(", ");
      if (there !== wanted) problems.push(`${view} has ${there || "no columns"}; expected ${wanted}`);
    }
  }
  return { looked: 2 * TABLES.length, problems };
}
