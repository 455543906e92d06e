import { InputError } from "../model/errors.js";

/** SQLite's own name of an error (`SQLITE_FULL`, `SQLITE_IOERR_WRITE`), or null where it is no error of a database. Told by its shape,
 *  so that nobody has to load the database library only to look at an error. */
function sqliteCode(e: unknown): string | null {
  if (!(e instanceof Error) || e.name !== "SqliteError" || !("code" in e)) return null;
  return typeof e.code === "string" ? e.code : null;
}

/** Whether an error, or what it came from, says that the database's disk is full. */
export function isDiskFull(e: unknown): boolean {
  const code = sqliteCode(e) ?? (e instanceof Error ? sqliteCode(e.cause) : null);
  return code !== null && FULL.test(code);
}

const FULL = /^SQLITE_(FULL|IOERR_SHMSIZE)$/;

/** An error of the database `file` in words for its user; null where it is none, or can only be a fault of the program
 *  (a broken constraint, a wrong statement). */
export function databaseProblem(file: string, e: unknown): InputError | null {
  const code = sqliteCode(e);
  if (code === null) return null;
  const said = e instanceof Error ? e.message : "";
  const make = (problem: string, fix: string): InputError => new InputError({ at: file, problem, fix }, e);
  if (/^SQLITE_(NOTADB|CORRUPT)/.test(code)) return notSound(file, said, e);
  if (FULL.test(code))
    return make(
      "no space left on its disk; the database is as it was",
      "free some space, or use a file on another disk; then run again",
    );
  if (/^SQLITE_(BUSY|LOCKED)/.test(code))
    return make(
      "another program has kept it locked for a minute; nothing was written",
      "wait until the other program is done, then run again",
    );
  if (/^SQLITE_(READONLY|PERM|AUTH)/.test(code))
    return make(
      `may not be written (${said}); it is as it was`,
      "make the file and its folder writable, or name another file with --db",
    );
  if (code.startsWith("SQLITE_CANTOPEN"))
    return make(`cannot be opened: ${said}`, "check that the file and its folder exist and may be read and written");
  if (code.startsWith("SQLITE_IOERR"))
    return make(`the disk reported an error (${said}, ${code})`, "check the disk, then run again");
  return null;
}

/** There is no such file. */
export const noDatabase = (file: string): InputError =>
  new InputError({
    at: file,
    problem: "no such database",
    fix: "make one with `coldseam ingest COOLDOWN.yaml --db FILE`",
  });

export function notSound(file: string, said: string, cause?: unknown): InputError {
  return new InputError(
    {
      at: file,
      problem: `not a sound SQLite database (${said})`,
      fix: "name another file with --db, or bring back a copy; this one was left as it is",
    },
    cause,
  );
}

/** Runs `f`; an error of the database comes out in words. */
export function inWords<T>(file: string, f: () => T): T {
  try {
    return f();
  } catch (e) {
    throw databaseProblem(file, e) ?? e;
  }
}
