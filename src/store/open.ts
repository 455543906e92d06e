import Database from "better-sqlite3";
import { copyFileSync, existsSync, readdirSync, readFileSync, statSync } from "node:fs";
import path from "node:path";
import { fileURLToPath } from "node:url";
import { InputError } from "../model/errors.js";

export type Db = Database.Database;

/** "cold" in ASCII: marks the file as ours in SQLite's header, so that a foreign database is refused instead of written to. */
const APPLICATION_ID = 0x636f6c64;

interface Migration {
  readonly version: number;
  readonly sql: string;
}

function migrations(): Migration[] {
  const dir = path.join(path.dirname(fileURLToPath(import.meta.url)), "../../migrations");
  return readdirSync(dir)
    .filter((f) => /^\d{4}-.*\.sql$/.test(f))
    .sort()
    .map((f) => ({ version: Number(f.slice(0, 4)), sql: readFileSync(path.join(dir, f), "utf8") }));
}

const number = (db: Db, pragma: string): number => Number(db.pragma(pragma, { simple: true }));

function sqliteProblem(file: string, e: unknown): InputError {
  const message = e instanceof Error ? e.message : String(e);
  const code = e instanceof Database.SqliteError ? e.code : "";
  if (code === "SQLITE_NOTADB" || code === "SQLITE_CORRUPT")
    return new InputError(
      { at: file, problem: `not a sound SQLite database (${message})`, fix: "name another file with --db; this one was left as it is" },
      e,
    );
  return new InputError(
    { at: file, problem: `cannot be opened as a database: ${message}`, fix: "check that the file and its folder exist and may be read and written" },
    e,
  );
}

/** Opens an existing database for reading. Throws InputError where it is missing, foreign, damaged, or of another schema version. */
export function openForReading(file: string): Db {
  if (!existsSync(file))
    throw new InputError({ at: file, problem: "no such database", fix: "make one with `coldseam ingest COOLDOWN.yaml --db FILE`" });
  return open(file, false);
}

/** Opens a database for an ingest, making it where there is none; an older schema is migrated after a copy is put beside it. */
export function openForWriting(file: string): Db {
  const folder = path.dirname(path.resolve(file));
  if (!existsSync(folder) || !statSync(folder).isDirectory())
    throw new InputError({ at: file, problem: `the folder ${folder} does not exist`, fix: "make the folder first, or name another file with --db" });
  return open(file, true);
}

function open(file: string, writing: boolean): Db {
  const existed = existsSync(file) && statSync(file).size > 0;
  let db: Db;
  try {
    // A file that is not ours must stay untouched to the byte: look at it read-only first.
    if (existed) inspect(file);
    db = new Database(file, { readonly: !writing, fileMustExist: !writing, timeout: 60_000 });
  } catch (e) {
    throw e instanceof InputError ? e : sqliteProblem(file, e);
  }
  try {
    db.pragma("foreign_keys = ON");
    if (writing) {
      db.pragma("journal_mode = WAL");
      db.pragma("synchronous = FULL");
      migrate(db, file, existed);
    } else if (number(db, "user_version") < newestVersion()) {
      throw new InputError({
        at: file,
        problem: `schema version ${number(db, "user_version")}, this program reads version ${newestVersion()}`,
        fix: "any `coldseam ingest … --db FILE` migrates it, after putting a copy beside it",
      });
    }
    return db;
  } catch (e) {
    db.close();
    throw e instanceof InputError ? e : sqliteProblem(file, e);
  }
}

const newestVersion = (): number => Math.max(...migrations().map((m) => m.version));

function inspect(file: string): void {
  const db = new Database(file, { readonly: true, fileMustExist: true, timeout: 60_000 });
  try {
    const version = number(db, "user_version");
    const id = number(db, "application_id");
    const tables = Number(db.prepare("SELECT count(*) FROM sqlite_master").pluck().get());
    if (id !== APPLICATION_ID && tables > 0)
      throw new InputError({
        at: file,
        problem: "an SQLite database, but not one made by coldseam",
        fix: "name another file with --db; this one was left as it is",
      });
    if (version > newestVersion())
      throw new InputError({
        at: file,
        problem: `schema version ${version}, newer than this program's ${newestVersion()}`,
        fix: "use the newer coldseam that made it; this file was left as it is",
      });
  } finally {
    db.close();
  }
}

function migrate(db: Db, file: string, existed: boolean): void {
  const from = number(db, "user_version");
  const pending = migrations().filter((m) => m.version > from);
  if (pending.length === 0) return;
  if (existed && from > 0) {
    db.pragma("wal_checkpoint(TRUNCATE)");
    copyFileSync(file, `${file}.schema-${from}.bak`);
  }
  db.transaction(() => {
    // Another process may have migrated between the look and the lock.
    const now = number(db, "user_version");
    for (const m of pending) {
      if (m.version <= now) continue;
      db.exec(m.sql);
      db.pragma(`user_version = ${m.version}`);
    }
    db.pragma(`application_id = ${APPLICATION_ID}`);
  }).immediate();
}
