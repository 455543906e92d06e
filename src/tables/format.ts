import { stringify } from "csv-stringify/sync";
import type { ExportedTable } from "./columns.js";

export type Format = "csv" | "tsv" | "json";
export const FORMATS: readonly Format[] = ["csv", "tsv", "json"];

type Cell = number | string | null;
type Row = Readonly<Record<string, Cell>>;

const isCells = (r: Row | readonly Cell[]): r is readonly Cell[] => Array.isArray(r);

/** A text that a spreadsheet would run as a formula is kept as text by a leading apostrophe; numbers are not touched. */
function harmless(cell: Cell): Cell {
  return typeof cell === "string" && /^[=+\-@\t\r]/.test(cell) ? `'${cell}` : cell;
}

/** The lines of an exported table in one of the formats, in chunks, so that a large table needs little memory.
 *  @param rows each with its cells by the column's name, or in the order of the columns
 *  A missing value is an empty field (csv, tsv) or null (json: an array of objects). */
export function* formatTable(
  table: ExportedTable,
  rows: Iterable<Row | readonly Cell[]>,
  format: Format,
): Generator<string> {
  const names = table.columns.map((c) => c.name);
  const cellsOf = (r: Row | readonly Cell[]): readonly Cell[] => (isCells(r) ? r : names.map((n) => r[n] ?? null));
  if (format === "json") {
    let first = true;
    yield "[";
    for (const r of rows) {
      const cells = cellsOf(r);
      yield `${first ? "\n" : ",\n"}  ${JSON.stringify(Object.fromEntries(names.map((n, k) => [n, cells[k]])))}`;
      first = false;
    }
    yield first ? "]\n" : "\n]\n";
    return;
  }
  const delimiter = format === "csv" ? "," : "\t";
  yield stringify([names], { delimiter });
  let batch: Cell[][] = [];
  for (const r of rows) {
    batch.push(cellsOf(r).map(harmless));
    // Small batches die young: with large ones most of the time would go into moving what is soon thrown away.
    if (batch.length >= 50) {
      yield stringify(batch, { delimiter });
      batch = [];
    }
  }
  if (batch.length > 0) yield stringify(batch, { delimiter });
}
