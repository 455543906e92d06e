import path from "node:path";
import { createWriteStream, rmSync, renameSync } from "node:fs";
import { pipeline } from "node:stream/promises";
import { Readable } from "node:stream";
import { InputError, UsageError } from "../model/errors.js";
import { readTable } from "../store/read.js";
import { TABLES, tableNamed } from "../tables/columns.js";
import { formatTable, type Format } from "../tables/format.js";
import { openSelected, type SelectOptions } from "./select.js";
import { say } from "./say.js";
import { closestWord } from "../model/text.js";

interface ExportOptions extends SelectOptions {
  readonly format: Format;
  readonly out?: string;
}

/** `coldseam export`: one table, streamed. A file is written beside and renamed, so that a failed export leaves no half of one. */
export async function exportTable(name: string, o: ExportOptions): Promise<void> {
  const table = tableNamed(name);
  if (table === undefined) {
    const names = TABLES.map((t) => t.name);
    const meant = closestWord(name, names);
    throw new UsageError(
      `no table "${name}"${meant === null ? "" : `; did you mean "${meant}"?`}`,
      `the tables are ${names.join(", ")}`,
    );
  }
  const { db, selection } = openSelected(o);
  try {
    const chunks = Readable.from(formatTable(table, readTable(db, table, selection), o.format));
    if (o.out === undefined) {
      await pipeline(chunks, process.stdout, { end: false });
      return;
    }
    refuseUnlikely(o.out, o.format);
    const beside = `${o.out}.part`;
    try {
      await pipeline(chunks, createWriteStream(beside));
      renameSync(beside, o.out);
    } catch (e) {
      rmSync(beside, { force: true });
      throw new InputError(
        {
          at: o.out,
          problem: `cannot be written: ${e instanceof Error ? e.message : String(e)}`,
          fix: "name a file in a folder that exists and may be written",
        },
        e,
      );
    }
    say(`${table.name}: written to ${o.out}`);
  } finally {
    db.close();
  }
}

/** A table may only replace a table: a slip in `--out` must not cost a database or an image. */
function refuseUnlikely(out: string, format: Format): void {
  if (out.toLowerCase().endsWith(`.${format}`) || out.toLowerCase().endsWith(".txt")) return;
  throw new UsageError(
    `--out ${out}: expected a name that ends in .${format}`,
    `for example --out ${path.basename(out, path.extname(out))}.${format}; other files are never written over`,
  );
}
