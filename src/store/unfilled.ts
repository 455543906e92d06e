import Database from "better-sqlite3";
import { existsSync, rmSync } from "node:fs";

/** Takes away a database in which nothing was ever stored, with its log: for whoever has made the file and failed to fill it. It stays
 *  where it holds a cooldown, where another connection has it open, and where SQLite cannot say so. */
export function removeUnfilled(file: string): void {
  if (!existsSync(file)) return;
  try {
    const db = new Database(file, { fileMustExist: true, timeout: 0 });
    try {
      // Only the last connection can leave write-ahead mode, and the log goes with it; after that the one lock keeps all others out.
      if (db.pragma("journal_mode = DELETE", { simple: true }) !== "delete") return;
      db.exec("BEGIN EXCLUSIVE");
      const made = db.prepare("SELECT count(*) FROM sqlite_master WHERE name = 'cooldown'").pluck().get() === 1;
      if (!made || db.prepare("SELECT count(*) FROM cooldown").pluck().get() === 0) rmSync(file);
    } finally {
      db.close();
    }
  } catch (e) {
    if (e instanceof Database.SqliteError) return;
    throw e;
  }
}
