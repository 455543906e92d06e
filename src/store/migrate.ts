import { readdirSync, readFileSync, renameSync, rmSync } from "node:fs";
import path from "node:path";
import { fileURLToPath } from "node:url";
import type { Database } from "better-sqlite3";

/** "cold" in ASCII: marks the file as ours in SQLite's header, so that a foreign database is refused instead of written to. */
export const APPLICATION_ID = 0x636f6c64;

interface Migration {
  readonly version: number;
  readonly sql: string;
}

export function migrations(): Migration[] {
  const dir = path.join(path.dirname(fileURLToPath(import.meta.url)), "../../migrations");
  return readdirSync(dir)
    .filter((f) => /^\d{4}-.*\.sql$/.test(f))
    .sort()
    .map((f) => ({ version: Number(f.slice(0, 4)), sql: readFileSync(path.join(dir, f), "utf8") }));
}

export const newestVersion = (): number => Math.max(...migrations().map((m) => m.version));

export const schemaVersion = (db: Database): number => Number(db.pragma("user_version", { simple: true }));

/** Brings the schema to the newest version in one transaction. An older schema is copied to `FILE.schema-N.bak` first. */
export function migrate(db: Database, file: string): void {
  const from = schemaVersion(db);
  const pending = migrations().filter((m) => m.version > from);
  if (pending.length === 0) return;
  if (from > 0) copyBeside(db, `${file}.schema-${from}.bak`);
  db.transaction(() => {
    // Another process may have migrated between the look and the lock.
    const now = schemaVersion(db);
    for (const m of pending) {
      if (m.version <= now) continue;
      db.exec(m.sql);
      db.pragma(`user_version = ${m.version}`);
    }
    db.pragma(`application_id = ${APPLICATION_ID}`);
  }).immediate();
}

/** A whole copy or none: what other processes have written but not yet moved into the file itself is in it too. */
function copyBeside(db: Database, copy: string): void {
  const part = `${copy}.${process.pid}.part`;
  rmSync(part, { force: true });
  try {
    db.prepare("VACUUM INTO ?").run(part);
    renameSync(part, copy);
  } finally {
    rmSync(part, { force: true });
  }
}
