import type { ExportedTable } from "../tables/columns.js";
import type { Db } from "./open.js";

export type Cell = number | string | null;
export type Row = Readonly<Record<string, Cell>>;

/** Which rows to answer from. Without `analysis`, the newest analysis of each cooldown. */
export interface Selection {
  readonly cooldowns?: readonly string[];
  readonly sample?: string;
  readonly analysis?: number;
}

/** The analyses to answer from, in the order of the exported rows. */
function analysesOf(sel: Selection): { sql: string; values: (string | number)[] } {
  const parts: string[] = [];
  const values: (string | number)[] = [];
  if (sel.cooldowns !== undefined && sel.cooldowns.length > 0) {
    parts.push(`c.name IN (${sel.cooldowns.map(() => "?").join(", ")})`);
    values.push(...sel.cooldowns);
  }
  if (sel.sample !== undefined) {
    parts.push("c.sample = ?");
    values.push(sel.sample);
  }
  if (sel.analysis !== undefined) {
    parts.push("a.id = ?");
    values.push(sel.analysis);
  } else parts.push("a.id IN (SELECT id FROM newest_analysis)");
  return {
    sql: `SELECT a.id FROM analysis a JOIN cooldown c ON c.id = a.cooldown_id WHERE ${parts.join(" AND ")} ORDER BY c.name, a.id`,
    values,
  };
}

/** The statement that gives one analysis's rows of a table, in the order of the export: it walks the primary key, sorts nothing and
 *  never touches the rows of another analysis.
 *  @param columns names of the table's columns; all of them where not given */
export function tableStatement(table: ExportedTable, columns = table.columns.map((c) => c.name)): string {
  const order = table.orderBy.filter((c) => c !== "cooldown" && c !== "analysis");
  return `SELECT ${columns.join(", ")} FROM ${table.view}_all WHERE analysis = ? ORDER BY ${order.join(", ")}`;
}

/** The rows of an exported table, one at a time, so that a large export needs little memory. All of them are from one moment, whatever
 *  other processes write meanwhile: the outer statement stays open and holds it.
 *  @param columns which of the table's columns are wanted; a few of many are read much sooner */
export function* readTable(
  db: Db,
  table: ExportedTable,
  sel: Selection = {},
  columns?: string[],
): Generator<Row, void> {
  const { sql, values } = analysesOf(sel);
  const rows = db.prepare<[number], Row>(tableStatement(table, columns));
  for (const { id } of db.prepare<(string | number)[], { id: number }>(sql).iterate(...values)) yield* rows.iterate(id);
}

/** The same rows as `readTable`, each as its cells in the order of the table's columns: half the work of naming every cell. */
export function* readCells(db: Db, table: ExportedTable, sel: Selection = {}): Generator<readonly Cell[], void> {
  const { sql, values } = analysesOf(sel);
  const rows = db.prepare<[number], readonly Cell[]>(tableStatement(table)).raw();
  for (const { id } of db.prepare<(string | number)[], { id: number }>(sql).iterate(...values)) yield* rows.iterate(id);
}

export interface CooldownSummary {
  readonly cooldown: string;
  readonly sample: string;
  readonly region: string | null;
  readonly analysis: number;
  readonly analyses: number;
  readonly made_at: string;
  readonly program_version: string;
  readonly frames: number;
  readonly lowest_temperature_K: number;
  readonly highest_temperature_K: number;
  readonly cycles: number;
  readonly notices: number;
  readonly settings_json: string;
}

/** What is in the database: a row a cooldown, with the analysis that answers for it. The cross join keeps SQLite from walking all frames,
 *  those of older analyses too, to find the ones of the newest. */
export function readCooldowns(db: Db): CooldownSummary[] {
  return db
    .prepare<[], CooldownSummary>(
      `SELECT c.name AS cooldown, c.sample, c.region, a.id AS analysis,
              (SELECT count(*) FROM analysis b WHERE b.cooldown_id = c.id) AS analyses,
              a.made_at, a.program_version, count(*) AS frames, min(f.temperature_k) AS lowest_temperature_K,
              max(f.temperature_k) AS highest_temperature_K, max(f.cycle) AS cycles,
              (SELECT count(*) FROM notice n WHERE n.analysis_id = a.id) AS notices, a.settings_json
       FROM cooldown c JOIN newest_analysis na ON na.cooldown_id = c.id JOIN analysis a ON a.id = na.id
       CROSS JOIN frame f ON f.analysis_id = a.id GROUP BY c.id ORDER BY c.name`,
    )
    .all();
}

export interface NoticeRow {
  readonly frame: number | null;
  readonly code: string;
  readonly message: string;
}

export function readNotices(db: Db, analysis: number): NoticeRow[] {
  return db
    .prepare<[number], NoticeRow>("SELECT frame, code, message FROM notice WHERE analysis_id = ? ORDER BY frame, id")
    .all(analysis);
}

/** Names of the cooldowns among `names` that the database does not hold. */
export function unknownCooldowns(db: Db, names: readonly string[]): string[] {
  const known = db.prepare<[string], { n: number }>("SELECT count(*) AS n FROM cooldown WHERE name = ?");
  return names.filter((n) => known.get(n)?.n === 0);
}

export function cooldownNames(db: Db): string[] {
  return db
    .prepare<[], { name: string }>("SELECT name FROM cooldown ORDER BY name")
    .all()
    .map((r) => r.name);
}

/** Those of the analyses that were made without a tip's resolution. */
export function analysesWithoutTip(db: Db, analyses: Iterable<number>): Set<number> {
  const without = db.prepare<[number]>("SELECT 1 FROM analysis WHERE id = ? AND tip_resolution_nm IS NULL");
  return new Set([...analyses].filter((id) => without.get(id) !== undefined));
}

/** A stored two-state map, still deflated. */
export function readMap(
  db: Db,
  analysis: number,
  frame: number,
): { rows: number; cols: number; deflated: Uint8Array } | null {
  const r = db
    .prepare<[number, number], { map_rows: number; map_cols: number; map_deflated: Uint8Array }>(
      "SELECT map_rows, map_cols, map_deflated FROM frame WHERE analysis_id = ? AND frame = ?",
    )
    .get(analysis, frame);
  return r === undefined ? null : { rows: r.map_rows, cols: r.map_cols, deflated: r.map_deflated };
}
