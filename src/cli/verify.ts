import { existsSync } from "node:fs";
import path from "node:path";
import { hashFile } from "../input/index.js";
import { InputError, UsageError } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { openForReading } from "../store/open.js";
import { verifyDatabase, type Check } from "../store/verify.js";
import { storedSources, type StoredSource } from "../store/verify_digests.js";
import { print } from "./say.js";

export interface VerifyOptions {
  readonly db: string;
  readonly sources?: boolean;
  readonly folder?: string;
}

/** Lines shown of one check; a database spoilt by hand may break one rule ten thousand times. */
const SHOWN = 5;

/** `coldseam verify`: a database looked at from outside. Exit code 1 where something is wrong; a source file that is only not here, as beside a
 *  copy of the database alone, says nothing against it. */
export async function verify(o: VerifyOptions): Promise<void> {
  if (o.folder !== undefined && o.sources !== true)
    throw new UsageError(
      "--folder says where the source files are, but without --sources nobody looks",
      "add --sources",
    );
  const db = openForReading(o.db);
  let checks = 0;
  let wrong = 0;
  let notHere = 0;
  const tell = (c: Check): void => {
    checks++;
    if (c.problems.length > 0) wrong++;
    print(`${c.problems.length === 0 ? "ok   " : "WRONG"} ${c.name} (${c.looked} ${c.of})\n`);
    for (const p of c.problems.slice(0, SHOWN)) print(`        ${plainText(p)}\n`);
    if (c.problems.length > SHOWN) print(`        and ${c.problems.length - SHOWN} more\n`);
  };
  try {
    for (const c of verifyDatabase(db)) tell(c);
    if (o.sources === true) {
      const found = await sourceCheck(o.db, storedSources(db), o.folder);
      tell(found.check);
      tellMissing(found.missing);
      notHere = found.missing.length;
    }
  } finally {
    db.close();
  }
  const missing = notHere === 0 ? "" : `; ${countOf(notHere, "source file")} not here`;
  print(
    wrong === 0
      ? `${o.db}: sound, ${checks} checks${missing}\n`
      : `${o.db}: ${wrong} of ${checks} checks found something wrong${missing}\n`,
  );
  if (wrong > 0) process.exitCode = 1;
}

/** Where a source may lie now: below --folder, there in the folder of the cooldown's own name, or where it was. */
function placesOf(dbFile: string, s: StoredSource, folder: string | undefined): string[] {
  if (path.isAbsolute(s.path)) return [s.path];
  if (folder !== undefined) {
    const own = s.folder === null ? [] : [path.resolve(folder, path.basename(s.folder), s.path)];
    return [...own, path.resolve(folder, s.path)];
  }
  return s.folder === null ? [] : [path.resolve(path.dirname(path.resolve(dbFile)), s.folder, s.path)];
}

function tellMissing(missing: readonly string[]): void {
  if (missing.length === 0) return;
  print(`not here: ${countOf(missing.length, "source file")}; --folder says where they are now\n`);
  for (const m of missing.slice(0, SHOWN)) print(`        ${plainText(m)}\n`);
  if (missing.length > SHOWN) print(`        and ${missing.length - SHOWN} more\n`);
}

async function sourceCheck(
  dbFile: string,
  sources: readonly StoredSource[],
  folder?: string,
): Promise<{ readonly check: Check; readonly missing: readonly string[] }> {
  const problems: string[] = [];
  const missing: string[] = [];
  for (const s of sources) {
    const places = placesOf(dbFile, s, folder);
    const file = places.find((p) => existsSync(p));
    if (file === undefined) {
      missing.push(`${s.place}: ${s.path}${places.length === 0 ? "" : ` (looked for ${places.join(" and ")})`}`);
      continue;
    }
    try {
      const now = await hashFile(file, s.path);
      if (now.sha256 !== s.sha256)
        problems.push(`${s.place}: ${s.path} is another file: ${s.bytes} bytes then, ${now.bytes} now (${file})`);
    } catch (e) {
      if (!(e instanceof InputError)) throw e;
      problems.push(`${s.place}: ${e.message}`);
    }
  }
  const looked = sources.length - missing.length;
  return { check: { name: "source files have their SHA-256", looked, of: "files", problems }, missing };
}
