import type { Db } from "./open.js";

/** A table that keeps rows of analyses. */
export interface AnalysisTable {
  readonly name: string;
  /** Its columns, without one that only numbers the rows of the table. */
  readonly columns: readonly string[];
}

/** Every table with an `analysis_id`, parents before children, as the schema itself has them: a table that a later schema adds is
 *  merged and forgotten with the rest. */
export function analysisTables(db: Db): AnalysisTable[] {
  const names = db
    .prepare<[], string>(
      `SELECT m.name FROM sqlite_master m WHERE m.type = 'table'
       AND EXISTS (SELECT 1 FROM pragma_table_info(m.name) c WHERE c.name = 'analysis_id') ORDER BY m.name`,
    )
    .pluck()
    .all();
  const parentsOf = db.prepare<[string], string>(`SELECT DISTINCT "table" FROM pragma_foreign_key_list(?)`).pluck();
  const columnsOf = db
    .prepare<[string], string>("SELECT name FROM pragma_table_info(?) WHERE NOT (pk = 1 AND name = 'id') ORDER BY cid")
    .pluck();
  const ordered: string[] = [];
  const visit = (name: string): void => {
    if (ordered.includes(name) || !names.includes(name)) return;
    for (const parent of parentsOf.all(name)) if (parent !== name) visit(parent);
    ordered.push(name);
  };
  for (const name of names) visit(name);
  return ordered.map((name) => ({ name, columns: columnsOf.all(name) }));
}
