import { existsSync, statSync } from "node:fs";
import path from "node:path";
import { UsageError } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { mergeInto, openSource, type MergedAnalysis, type MergeSource } from "../store/merge.js";
import { openForWriting } from "../store/open.js";
import { removeUnfilled } from "../store/unfilled.js";
import { command } from "./called.js";
import { print, say } from "./say.js";

export interface MergeOptions {
  readonly into: string;
}

function sameFile(a: string, b: string): boolean {
  if (path.resolve(a) === path.resolve(b)) return true;
  if (!existsSync(a) || !existsSync(b)) return false;
  const [x, y] = [statSync(a), statSync(b)];
  return x.dev === y.dev && x.ino === y.ino;
}

function line(m: MergedAnalysis): string {
  const name = `  ${plainText(m.cooldown)}: `;
  const what = `analysis ${m.was} of ${plainText(m.from)}`;
  return m.known
    ? `${name}${what} is there already, as analysis ${m.now}\n`
    : `${name}${what} is now analysis ${m.now}, ${countOf(m.frames, "frame")}\n`;
}

/** `coldseam merge`: everything that several databases hold, in one; all or nothing. */
export async function merge(files: readonly string[], o: MergeOptions): Promise<void> {
  const itself = files.find((f) => sameFile(f, o.into));
  if (itself !== undefined)
    throw new UsageError(
      `merge ${itself} --into ${o.into}: one and the same file`,
      "name the databases to take from, and with --into the one to bring them together in",
    );
  const sources: MergeSource[] = [];
  try {
    // All sources are looked at before the target is made or touched.
    for (const f of files) sources.push(await openSource(f));
    const isNew = !existsSync(o.into);
    const db = openForWriting(o.into);
    let merged: MergedAnalysis[];
    try {
      merged = mergeInto(db, sources);
    } catch (e) {
      db.close();
      // Nothing was merged: no empty file is left to wonder about.
      if (isNew) removeUnfilled(o.into);
      throw e;
    }
    db.close();
    const added = merged.filter((m) => !m.known);
    print(
      `${o.into}: ${countOf(added.length, "analysis", "analyses")} added, ${merged.length - added.length} there already\n`,
    );
    for (const m of merged) print(line(m));
    say(`next: ${command("cooldowns", "--db", o.into)}    ${command("verify", "--db", o.into)}`);
  } finally {
    for (const s of sources) s.close();
  }
}
