import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { InputError } from "../model/errors.js";
import { analysisTables } from "./analysis_tables.js";
import { difference, storedIdentity } from "./identity.js";
import { newestVersion, schemaVersion } from "./migrate.js";
import { openForWriting, openUntouched, type Db } from "./open.js";
import { inWords } from "./problem.js";
import { folderFrom } from "./save.js";

/** A database to take from, open for reading. */
export interface MergeSource {
  /** As the user named it. */
  readonly file: string;
  readonly db: Db;
  close(): void;
}

/** Opens a database to take from; it keeps every byte. One of an older schema is migrated as a copy in the system's temporary folder.
 *  Throws InputError where it is missing, foreign, damaged or newer than this program. */
export async function openSource(file: string): Promise<MergeSource> {
  const db = openUntouched(file);
  try {
    const version = inWords(file, () => schemaVersion(db));
    if (version === newestVersion()) return { file, db, close: () => db.close() };
    if (version === 0 || version > newestVersion())
      throw new InputError({
        at: file,
        problem:
          version === 0
            ? "an empty database: no ingest into it was ever finished"
            : `schema version ${version}, newer than this program's ${newestVersion()}`,
        fix: version === 0 ? "leave it out" : "use the newer coldseam that made it",
      });
    const dir = mkdtempSync(path.join(tmpdir(), "coldseam-merge-"));
    try {
      const copy = path.join(dir, "copy.sqlite");
      await db.backup(copy);
      db.close();
      const migrated = openForWriting(copy);
      const close = (): void => {
        migrated.close();
        rmSync(dir, { recursive: true, force: true });
      };
      return { file, db: migrated, close };
    } catch (e) {
      rmSync(dir, { recursive: true, force: true });
      throw e;
    }
  } catch (e) {
    db.close();
    throw e;
  }
}

export interface MergedAnalysis {
  readonly from: string;
  readonly cooldown: string;
  /** Its number where it came from, and in the database it is in now. */
  readonly was: number;
  readonly now: number;
  /** True where the same work was there already. */
  readonly known: boolean;
  readonly frames: number;
}

type Value = number | bigint | string | null | Uint8Array;
type AnyRow = Record<string, Value>;

interface StoredCooldown {
  readonly id: number;
  readonly name: string;
  readonly sample: string;
  readonly region: string | null;
}

interface StoredAnalysis extends AnyRow {
  readonly id: number;
  readonly work_sha256: string;
  readonly description_json: string;
  readonly made_at: string;
}

/** Brings every analysis of the sources into `db`, in one transaction: all of it or nothing. The same work is kept once; the others get
 *  new numbers, in the order of the sources. Throws InputError showing both where a cooldown's name stands for different content. */
export function mergeInto(db: Db, sources: readonly MergeSource[]): MergedAnalysis[] {
  const run = db.transaction(() => {
    const merged: MergedAnalysis[] = [];
    // Where each analysis in `db` came from, for messages.
    const origin = new Map<number, string>();
    for (const s of sources) {
      // One moment of the source, whatever is written to it meanwhile.
      const take = s.db.transaction(() => {
        const cooldowns = s.db.prepare<[], StoredCooldown>("SELECT * FROM cooldown ORDER BY name").all();
        for (const c of cooldowns) merged.push(...mergeCooldown(db, s, c, origin));
      });
      inWords(s.file, () => take());
    }
    return merged;
  });
  return inWords(db.name, () => run.immediate());
}

function mergeCooldown(db: Db, s: MergeSource, c: StoredCooldown, origin: Map<number, string>): MergedAnalysis[] {
  const merged: MergedAnalysis[] = [];
  const analyses = s.db
    .prepare<[number], StoredAnalysis>("SELECT * FROM analysis WHERE cooldown_id = ? ORDER BY made_at, id")
    .all(c.id);
  const there = db.prepare<[string], { id: number }>("SELECT id FROM analysis WHERE work_sha256 = ?");
  const count = s.db.prepare<[number], number>("SELECT count(*) FROM frame WHERE analysis_id = ?").pluck();
  for (const a of analyses) {
    const known = there.get(a.work_sha256);
    if (known === undefined) refuseOther(db, s, c, a, origin);
    const now = known?.id ?? copyAnalysis(db, s, c, a);
    if (known === undefined) origin.set(now, s.file);
    const frames = count.get(a.id) ?? 0;
    merged.push({ from: s.file, cooldown: c.name, was: a.id, now, known: known !== undefined, frames });
  }
  return merged;
}

/** One of two cooldowns of a name must hold the other whole; the longer one may be on either side. */
function refuseOther(db: Db, s: MergeSource, c: StoredCooldown, a: StoredAnalysis, origin: Map<number, string>): void {
  const newest = db
    .prepare<[string], { id: number; description_json: string; made_at: string }>(
      `SELECT a.id, a.description_json, a.made_at FROM cooldown c JOIN newest_analysis n ON n.cooldown_id = c.id
       JOIN analysis a ON a.id = n.id WHERE c.name = ?`,
    )
    .get(c.name);
  if (newest === undefined) return;
  const held = storedIdentity(newest.description_json);
  const given = storedIdentity(a.description_json);
  const differ = held.frames.length <= given.frames.length ? difference(held, given) : turned(difference(given, held));
  if (differ === null) return;
  const show = (x: typeof held, made: string): string =>
    `sample "${x.sample}", ${x.frames.length} frames, analysed ${made.slice(0, 10)}`;
  const where = origin.get(newest.id) ?? db.name;
  throw new InputError({
    at: s.file,
    problem:
      `cooldown "${c.name}" stands for other content in ${where}. ` +
      `There: ${show(held, newest.made_at)}; ${differ.inFirst}. Here: ${show(given, a.made_at)}; ${differ.inSecond}`,
    fix: "ingest one of them again under a name of its own, or remove it with `coldseam forget`; nothing was merged",
  });
}

const turned = (d: ReturnType<typeof difference>): ReturnType<typeof difference> =>
  d === null ? null : { inFirst: d.inSecond, inSecond: d.inFirst };

function copyAnalysis(db: Db, s: MergeSource, c: StoredCooldown, a: StoredAnalysis): number {
  db.prepare("INSERT INTO cooldown (name, sample, region) VALUES (?, ?, ?) ON CONFLICT (name) DO NOTHING").run(
    c.name,
    c.sample,
    c.region,
  );
  const owner = db.prepare<[string], { id: number }>("SELECT id FROM cooldown WHERE name = ?").get(c.name);
  const { id: _own, ...row } = a;
  const now = insert(db, "analysis", {
    ...row,
    cooldown_id: owner?.id ?? null,
    description_json: movedDescription(a.description_json, s.file, db.name),
  });
  for (const t of analysisTables(db)) {
    const columns = t.columns.join(", ");
    const values = t.columns.map((c) => (c === "analysis_id" ? "@now" : `@${c}`)).join(", ");
    const add = db.prepare(`INSERT INTO ${t.name} (${columns}) VALUES (${values})`);
    const rows = s.db.prepare<[number], AnyRow>(`SELECT ${columns} FROM ${t.name} WHERE analysis_id = ?`);
    for (const r of rows.iterate(a.id)) add.run({ ...r, now });
  }
  return now;
}

/** The folder of the sources is kept as seen from the database's own. */
function movedDescription(json: string, from: string, to: string): string {
  const d = JSON.parse(json) as { folder?: unknown };
  if (typeof d.folder !== "string") return json;
  const folder = path.resolve(path.dirname(path.resolve(from)), d.folder);
  return JSON.stringify({ ...d, folder: folderFrom(to, folder) });
}

function insert(db: Db, table: string, row: AnyRow): number {
  const keys = Object.keys(row);
  const sql = `INSERT INTO ${table} (${keys.join(", ")}) VALUES (${keys.map((k) => `@${k}`).join(", ")})`;
  return Number(db.prepare(sql).run(row).lastInsertRowid);
}
