import { CsvError, parse } from "csv-parse/sync";
import type { Problem } from "../model/errors.js";
import { closestWord, plainText } from "../model/text.js";
import { IMAGE_KEYS, type ImageKey } from "./schema.js";
import { foundText } from "./schema_problems.js";
import { signalProblem } from "./signal_form.js";
import { ISO_TIME, parseTime } from "./times.js";

/** One row of a frames table, checked as far as it goes without opening images. */
export interface TableRow {
  readonly line: number;
  /** null where the log of the thermometer has to say it. */
  readonly temperatureK: number | null;
  /** Path as written, by image. */
  readonly paths: Partial<Record<ImageKey, string>>;
  readonly startedAt: string | null;
  readonly endedAt: string | null;
  readonly stageXNm: number | null;
  readonly stageYNm: number | null;
}

const COLUMNS: readonly string[] = [
  "temperature_K",
  ...IMAGE_KEYS,
  "started_at",
  "ended_at",
  "stage_x_nm",
  "stage_y_nm",
];
const MAX_ROWS = 10_000;

/**
 * Reads a frames table: comma-separated with a header, one row a frame. Every mistake is appended to `problems` with its line
 * and column name; rows with a mistake are left out of what is returned.
 * @param name      how the file is called in messages
 * @param fromLog   temperatures come from a log: the column may be missing or empty
 * @param empty     where a table without rows is told
 */
export function parseFramesTable(
  text: string,
  name: string,
  problems: Problem[],
  fromLog = false,
  empty = problems,
): TableRow[] {
  const records = parseCsv(text, name, problems);
  if (records === null) return [];
  if (records.length === 0) {
    empty.push({ at: name, problem: "the table is empty", fix: "begin with the line temperature_K,amplitude" });
    return [];
  }
  const [head, ...body] = records;
  const columns = head.cells.map((c) => c.trim());
  const other = separatorOf(columns);
  if (other !== null) {
    problems.push({
      at: `${name}:${head.line}`,
      problem: `the names of the columns are separated by ${other}; expected commas`,
      fix: "save the table with commas between its fields, and with a point for the decimals",
    });
    return [];
  }
  const before = problems.length;
  checkHead(columns, `${name}:${head.line}`, problems, fromLog);
  if (problems.length > before) return [];
  if (body.length === 0) {
    empty.push({ at: name, problem: "a header but no row; expected one row a frame", fix: "add the frames" });
  }
  if (body.length > MAX_ROWS) {
    problems.push({ at: name, problem: `${body.length} rows; at most ${MAX_ROWS} frames`, fix: "split the cooldown" });
    return [];
  }
  return body.flatMap((record) => {
    const row = checkRow(record, columns, name, problems, fromLog);
    return row === null ? [] : [row];
  });
}

/** What separates the fields of a table that has no commas, in words; null where it has, or where it cannot be told. */
function separatorOf(columns: readonly string[]): string | null {
  const [only, ...more] = columns;
  if (more.length > 0) return null;
  for (const [mark, words] of [[";", "semicolons"] as const, ["\t", "tabs"] as const]) {
    if (only.split(mark).filter((c) => COLUMNS.includes(c.trim().replace(/^"(.*)"$/, "$1"))).length > 1) return words;
  }
  return null;
}

interface CsvRecord {
  readonly line: number;
  readonly cells: readonly string[];
}

function parseCsv(text: string, name: string, problems: Problem[]): CsvRecord[] | null {
  try {
    const records: CsvRecord[] = [];
    parse(text, {
      bom: true,
      record_delimiter: ["\r\n", "\n", "\r"],
      skip_empty_lines: true,
      relax_column_count: true,
      trim: true,
      on_record: (cells: string[], context) => {
        if (cells.some((c) => c !== "")) records.push({ line: context.lines, cells });
        return null;
      },
    });
    return records;
  } catch (e) {
    if (!(e instanceof CsvError)) throw e;
    problems.push({ at: name, problem: plainText(e.message), fix: "mend the quotes at this place" });
    return null;
  }
}

function checkHead(columns: readonly string[], at: string, problems: Problem[], fromLog: boolean): void {
  columns.forEach((c, i) => {
    if (!COLUMNS.includes(c)) {
      const likely = closestWord(c, COLUMNS);
      problems.push({
        at,
        problem: `no column ${foundText(c)}${likely === null ? "" : `; did you mean "${likely}"?`}`,
        fix: `the columns are ${COLUMNS.join(", ")}; the names are separated by commas`,
      });
    } else if (columns.indexOf(c) !== i) {
      problems.push({ at, problem: `column "${c}" stands twice`, fix: "keep one of the two" });
    }
  });
  const required = fromLog ? [] : ["temperature_K"];
  if (!columns.includes("signal") && !columns.includes("real")) required.push("amplitude");
  for (const c of required) {
    if (!columns.includes(c)) problems.push({ at, problem: `no column "${c}"`, fix: `add it: it is required` });
  }
  if (columns.includes("stage_x_nm") !== columns.includes("stage_y_nm")) {
    problems.push({ at, problem: "only one of stage_x_nm and stage_y_nm", fix: "give both, or neither" });
  }
}

function checkRow(
  record: CsvRecord,
  columns: readonly string[],
  name: string,
  problems: Problem[],
  fromLog: boolean,
): TableRow | null {
  const before = problems.length;
  const at = `${name}:${record.line}`;
  if (record.cells.length !== columns.length) {
    const problem = `${record.cells.length} fields; the header has ${columns.length}`;
    problems.push({ at, problem, fix: "put names with a comma in quotes" });
    return null;
  }
  const cell = (column: string): string => record.cells[columns.indexOf(column)] ?? "";
  const complain = (column: string, expected: string, fix: string): void => {
    const found = cell(column) === "" ? "empty" : foundText(cell(column));
    problems.push({ at, problem: `${column} is ${found}; expected ${expected}`, fix });
  };
  const temperatureK = plainNumber(cell("temperature_K"));
  const left = fromLog && cell("temperature_K") === "";
  if (!left && !(temperatureK !== null && temperatureK > 0 && temperatureK <= 1000)) {
    complain("temperature_K", "a temperature in K above 0 and at most 1000", "give it in kelvin (0 °C is 273.15 K)");
  }
  const stage = (column: string): number | null => {
    if (cell(column) === "") return null;
    const v = plainNumber(cell(column));
    if (v === null) complain(column, "a number of nm", "write a plain number, with a point for the decimals");
    return v;
  };
  const [stageXNm, stageYNm] = [stage("stage_x_nm"), stage("stage_y_nm")];
  if ((cell("stage_x_nm") === "") !== (cell("stage_y_nm") === "")) {
    complain(cell("stage_x_nm") === "" ? "stage_x_nm" : "stage_y_nm", "a number, as its partner has one", "give both");
  }
  const time = (column: string): string | null => {
    if (cell(column) === "") return null;
    if (ISO_TIME.test(cell(column)) && !Number.isNaN(parseTime(cell(column)))) return cell(column);
    complain(column, "a time as ISO 8601", "write for example 2024-05-17T09:30:00+02:00");
    return null;
  };
  const [startedAt, endedAt] = [time("started_at"), time("ended_at")];
  if (startedAt !== null && endedAt !== null && parseTime(endedAt) < parseTime(startedAt)) {
    problems.push({ at, problem: "ended_at lies before started_at", fix: "mend the times" });
  }
  const paths: Partial<Record<ImageKey, string>> = {};
  for (const c of IMAGE_KEYS) if (cell(c) !== "") paths[c] = cell(c);
  const wrong = signalProblem(paths);
  if (wrong === "none") complain("amplitude", "a file: every frame needs it", "give the file, or drop the row");
  else if (wrong !== null) problems.push({ at, ...wrong });
  if (problems.length > before) return null;
  return { line: record.line, temperatureK, paths, startedAt, endedAt, stageXNm, stageYNm };
}

/** A decimal number and nothing else; null for the rest (JavaScript would take "0x10", "" and " " too). */
function plainNumber(s: string): number | null {
  return /^[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$/.test(s) ? Number(s) : null;
}
