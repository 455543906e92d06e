/** A row of a stored table, as it is exported. */
export type Cell = number | string | null;
export type Row = Readonly<Record<string, Cell>>;

/** The number in a column, null where it is empty. */
export function num(r: Row, column: string): number | null {
  const v = r[column];
  return typeof v === "number" ? v : null;
}

/** The number in a column that is never empty. */
export function must(r: Row, column: string): number {
  const v = r[column];
  if (typeof v !== "number") throw new RangeError(`${column} is empty`);
  return v;
}

export const word = (r: Row, column: string): string => String(r[column] ?? "");

/** The numbers that a figure shows, as `--data` writes them. */
export interface FigureTable {
  readonly columns: readonly string[];
  readonly rows: readonly (readonly Cell[])[];
}
