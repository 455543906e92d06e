import { stringify } from "csv-stringify/sync";
import type { ExportedTable } from "./columns.js";

export type Format = "csv" | "tsv" | "json";
export const FORMATS: readonly Format[] = ["csv", "tsv", "json"];

type Cell = number | string | null;
type Row = Readonly<Record<string, Cell>>;

/** A text that a spreadsheet would run as a formula is kept as text by a leading apostrophe; numbers are not touched. */
function harmless(cell: Cell): Cell {
  return typeof cell === "string" && /^[=+\-@\t\r]/.test(cell) ? `'${cell}` : cell;
}

/** The lines of an exported table in one of the formats, in chunks, so that a large table needs little memory.
 *  A missing value is an empty field (csv, tsv) or null (json: an array of objects). */
export function* formatTable(table: ExportedTable, rows: Iterable<Row>, format: Format): Generator<string> {
  const names = table.columns.map((c) => c.name);
  if (format === "json") {
    let first = true;
    yield "[";
    for (const r of rows) {
      yield `${first ? "\n" : ",\n"}  ${JSON.stringify(Object.fromEntries(names.map((n) => [n, r[n] ?? null])))}`;
      first = false;
    }
    yield first ? "]\n" : "\n]\n";
    return;
  }
  const delimiter = format === "csv" ? "," : "\t";
  yield stringify([names], { delimiter });
  let batch: Cell[][] = [];
  for (const r of rows) {
    batch.push(names.map((n) => harmless(r[n] ?? null)));
    if (batch.length >= 1000) {
      yield stringify(batch, { delimiter });
      batch = [];
    }
  }
  if (batch.length > 0) yield stringify(batch, { delimiter });
}
