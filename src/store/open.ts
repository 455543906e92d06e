import Database from "better-sqlite3";
import { closeSync, existsSync, openSync, readFileSync, readSync, statSync } from "node:fs";
import path from "node:path";
import { InputError } from "../model/errors.js";
import { APPLICATION_ID, migrate, newestVersion, schemaVersion } from "./migrate.js";
import { databaseProblem, inWords, noDatabase, notSound } from "./problem.js";
import { removeUnfilled } from "./unfilled.js";

export type Db = Database.Database;

/** How long another program's lock is waited for, ms. */
const PATIENCE_MS = 60_000;
/** A database that can only be read as a copy in memory may be this large. */
const MOST_IN_MEMORY = 1 << 30;

/** Opens an existing database for reading. Nothing is changed; what a killed program has left in the log beside the file is moved into
 *  it at the end, as the next writer would. Throws InputError where it is missing, foreign, damaged, or of another schema version. */
export function openForReading(file: string): Db {
  const db = open(file, false);
  try {
    const version = inWords(file, () => schemaVersion(db));
    if (version > newestVersion()) throw newer(file, version);
    if (version === 0)
      throw new InputError({
        at: file,
        problem: "an empty database: no ingest into it was ever finished",
        fix: "run `coldseam ingest COOLDOWN.yaml --db FILE` (again)",
      });
    if (version < newestVersion())
      throw new InputError({
        at: file,
        problem: `schema version ${version}, this program reads version ${newestVersion()}`,
        fix: "any `coldseam ingest … --db FILE` migrates it, after putting a copy beside it",
      });
    return db;
  } catch (e) {
    db.close();
    throw e;
  }
}

/** As `openForReading`, of any schema version, and the file keeps every byte whatever lies beside it. */
export function openUntouched(file: string): Db {
  return open(file, bytesOf(`${file}-wal`) > 0);
}

/** A connection that may write, though it never does, takes the log and its lock files away when it is the last to close; one that
 *  may not leaves them lying, and a copy of the file alone would then miss what is in the log. */
function open(file: string, readonly: boolean): Db {
  if (!existsSync(file)) throw noDatabase(file);
  look(file);
  try {
    const db = new Database(file, { readonly, fileMustExist: true, timeout: PATIENCE_MS });
    try {
      db.pragma("query_only = ON");
      db.prepare("SELECT count(*) FROM sqlite_master").get();
      return db;
    } catch (e) {
      db.close();
      throw e;
    }
  } catch (e) {
    const copy = inMemory(file, e);
    if (copy !== null) return copy;
    throw databaseProblem(file, e) ?? e;
  }
}

/** Opens a database for an ingest, making it where there is none; an older schema is migrated after a copy is put beside it. Throws
 *  InputError, before anything is written, where the file is foreign, damaged, newer than this program, or may not be written; a file
 *  that it could not make whole is taken away. */
export function openForWriting(file: string): Db {
  const folder = path.dirname(path.resolve(file));
  if (!existsSync(folder) || !statSync(folder).isDirectory())
    throw new InputError({
      at: file,
      problem: `the folder ${folder} does not exist`,
      fix: "make the folder first, or name another file with --db",
    });
  const isNew = !existsSync(file);
  if (bytesOf(file) > 0) checkSound(file);
  try {
    const db = inWords(file, () => openToWrite(file));
    // Whoever made this very file may have failed and taken it away (`removeUnfilled`) before it was locked here.
    if (existsSync(file)) return db;
    db.close();
    return inWords(file, () => openToWrite(file));
  } catch (e) {
    if (isNew) removeUnfilled(file);
    throw e;
  }
}

function openToWrite(file: string): Db {
  const db = new Database(file, { timeout: PATIENCE_MS });
  try {
    db.pragma("foreign_keys = ON");
    db.pragma("synchronous = FULL");
    // A new file gets its tables before it gets a log: where they find no room, all of them can be taken back.
    if (schemaVersion(db) === 0) migrate(db, file);
    if (db.pragma("journal_mode", { simple: true }) !== "wal") db.pragma("journal_mode = WAL");
    mustBeWritable(db);
    migrate(db, file);
    // What is in the log goes into the file while there is room: a log without content is taken away at the end, however full the disk.
    db.pragma("wal_checkpoint(PASSIVE)");
    return db;
  } catch (e) {
    db.close();
    throw e;
  }
}

/** A file that may not be written is found out now, not after an hour of analysis: SQLite opens it without a word, and begins to complain
 *  at the first change. This one is taken back before it reaches the disk. */
function mustBeWritable(db: Db): void {
  db.exec("BEGIN IMMEDIATE");
  try {
    db.pragma(`user_version = ${schemaVersion(db)}`);
  } finally {
    db.exec("ROLLBACK");
  }
}

/** Opens an existing database to change what is in it. Throws InputError as `openForWriting`, and where there is none. */
export function openForChange(file: string): Db {
  openUntouched(file).close();
  return openForWriting(file);
}

/** Reads the whole file before anything may write to it: a damaged database must stay as it is, for whoever wants to save it. */
function checkSound(file: string): void {
  const db = openUntouched(file);
  try {
    const version = inWords(file, () => schemaVersion(db));
    if (version > newestVersion()) throw newer(file, version);
    const found = inWords(file, () => db.pragma("quick_check(1)", { simple: true }));
    if (found !== "ok") throw notSound(file, String(found).replace(/\s+/g, " "));
  } finally {
    db.close();
  }
}

const newer = (file: string, version: number): InputError =>
  new InputError({
    at: file,
    problem: `schema version ${version}, newer than this program's ${newestVersion()}`,
    fix: "use the newer coldseam that made it; this file was left as it is",
  });

const bytesOf = (file: string): number => statSync(file, { throwIfNoEntry: false })?.size ?? 0;

/** Refuses a file that is not ours by its first bytes alone: SQLite itself would put lock files beside it.
 *  Offsets: "The SQLite Database File Format", sqlite.org/fileformat2.html, sections 1.3 and 1.6. Also one whose length is not that of whole pages. */
function look(file: string): void {
  const head = Buffer.alloc(108);
  let read: number;
  try {
    const fd = openSync(file, "r");
    try {
      read = readSync(fd, head, 0, head.length, 0);
    } finally {
      closeSync(fd);
    }
  } catch (e) {
    throw new InputError(
      {
        at: file,
        problem: `cannot be read: ${e instanceof Error ? e.message : String(e)}`,
        fix: "name a file that may be read",
      },
      e,
    );
  }
  if (read === 0) return;
  if (read < head.length || head.toString("latin1", 0, 16) !== "SQLite format 3\0")
    throw notSound(file, "it does not begin like one");
  // SQLite fills up a last page that is cut short with zeros, without a word; what waits in a log may still make it whole.
  const page = head.readUInt16BE(16) === 1 ? 65536 : head.readUInt16BE(16);
  if (page >= 512 && bytesOf(file) % page !== 0 && bytesOf(`${file}-wal`) + bytesOf(`${file}-journal`) === 0)
    throw notSound(file, `it is cut off: ${bytesOf(file)} bytes are no whole number of its pages of ${page}`);
  const ours = head.readUInt32BE(68) === APPLICATION_ID;
  // A leaf page without cells as first page: no table yet, as an ingest stopped in its first moment leaves it.
  const blank = head[100] === 0x0d && head.readUInt16BE(103) === 0;
  if (!ours && !blank)
    throw new InputError({
      at: file,
      problem: "an SQLite database, but not one made by coldseam",
      fix: "name another file with --db; this one was left as it is",
    });
}

/** The database as a copy in memory, where its folder may not be written (write-ahead mode wants lock files there). Null where that
 *  is not what `e` is about, or where part of the content waits in the log beside the file. */
function inMemory(file: string, e: unknown): Db | null {
  const code = e instanceof Database.SqliteError ? e.code : "";
  if (!/^SQLITE_(CANTOPEN|READONLY)/.test(code) || bytesOf(`${file}-wal`) > 0) return null;
  if (bytesOf(file) > MOST_IN_MEMORY) return null;
  const bytes = readFileSync(file);
  // Bytes 18 and 19: write-ahead (2) or rollback mode (1); memory knows no write-ahead log.
  bytes[18] = 1;
  bytes[19] = 1;
  const db = new Database(bytes);
  db.pragma("query_only = ON");
  return db;
}
