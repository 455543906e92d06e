import path from "node:path";
import { pipeline } from "node:stream/promises";
import { Readable } from "node:stream";
import { UsageError } from "../model/errors.js";
import { readCells } from "../store/read.js";
import { TABLES, tableNamed } from "../tables/columns.js";
import { formatTable, type Format } from "../tables/format.js";
import { emptyText, openSelected, type SelectOptions } from "./select.js";
import { say, shownText } from "./say.js";
import { closestWord } from "../model/text.js";
import { writeFile } from "./write_file.js";

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
    const empty = emptyText(db);
    if (empty !== null) say(`note: ${empty}`);
    const text = formatTable(table, readCells(db, table, selection), o.format);
    if (o.out === undefined) {
      // What is in names must not steer a terminal; a pipe and a file get every byte.
      const shown = process.stdout.isTTY ? forTerminal(text) : text;
      await pipeline(Readable.from(shown), process.stdout, { end: false });
      return;
    }
    refuseUnlikely(o.out, o.format);
    writeFile(o.out, text);
    say(`${table.name}: written to ${o.out}`);
  } finally {
    db.close();
  }
}

export function* forTerminal(parts: Iterable<string>): Generator<string> {
  for (const part of parts) yield shownText(part);
}

/** A table may only replace a table: a slip in `--out` must not cost a database or an image. */
function refuseUnlikely(out: string, format: Format): void {
  if (out.toLowerCase().endsWith(`.${format}`) || out.toLowerCase().endsWith(".txt")) return;
  throw new UsageError(
    `--out ${out}: expected a name that ends in .${format}`,
    `for example --out ${path.basename(out, path.extname(out))}.${format}; other files are never written over`,
  );
}
