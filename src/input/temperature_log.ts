import { CsvError, parse } from "csv-parse/sync";
import type { Problem } from "../model/errors.js";
import { closestWord, countOf, plainText } from "../model/text.js";
import type { ThermometryEntry } from "./schema.js";
import type { TemperatureLog } from "./scan_temperature.js";
import { foundText } from "./schema_problems.js";
import { instant, type TimeZone } from "./times.js";

const MAX_ENTRIES = 5_000_000;
/** Mistakes told one by one. */
const MOST_TOLD = 8;

/**
 * Reads a thermometer's log: a head line, then an entry a line, separated by tabs, semicolons or commas (told by the head); lines that begin
 * with # are comments. Times are ISO 8601 with an offset, or local ones in `zone`; temperatures K or °C. Entries without a number
 * are left out and counted; repeated times keep the first. Problems are appended with their lines.
 * @returns null where there is a problem
 */
export function parseTemperatureLog(
  text: string,
  entry: Pick<ThermometryEntry, "time" | "temperature" | "unit">,
  zone: TimeZone | null,
  name: string,
  problems: Problem[],
): { readonly log: TemperatureLog; readonly skipped: number } | null {
  const before = problems.length;
  const records = recordsOf(text, name, problems);
  if (records === null) return null;
  const head = records[0]?.cells.map((c) => c.trim()) ?? [];
  const [timeAt = -1, temperatureAt = -1] = [entry.time, entry.temperature].map((column) => {
    const at = head.indexOf(column);
    if (at < 0) {
      const likely = closestWord(column, head);
      problems.push({
        at: `${name}:${records[0]?.line ?? 1}`,
        problem: `no column ${foundText(column)}${likely === null ? "" : `; did you mean ${foundText(likely)}?`}`,
        fix: head.length === 0 ? "give the log's file" : `the columns are ${plainText(head.join(", ").slice(0, 300))}`,
      });
    } else if (head.lastIndexOf(column) !== at) {
      const problem = `column ${foundText(column)} stands twice`;
      problems.push({ at: `${name}:${records[0]?.line ?? 1}`, problem, fix: "keep one of the two" });
    }
    return at;
  });
  if (problems.length > before) return null;

  const times: number[] = [];
  const kelvin: number[] = [];
  let skipped = 0;
  const told = new Teller(name, problems);
  for (const { line, cells } of records.slice(1)) {
    const cell = (cells[temperatureAt] ?? "").trim();
    const value = cell === "" ? NaN : Number(cell);
    if (!Number.isFinite(value)) {
      skipped++;
      continue;
    }
    const k = entry.unit === "C" ? value + 273.15 : value;
    if (!(k > 0 && k <= 1000)) {
      told.tell(line, `${value} ${entry.unit === "C" ? "°C" : "K"}; expected above 0 K and at most 1000 K`, UNIT_FIX);
      continue;
    }
    const written = (cells[timeAt] ?? "").trim();
    const time = instant(written, zone);
    if ("fault" in time) {
      told.tell(line, ...timeFault(time.fault, written));
      continue;
    }
    const s = time.ms / 1000;
    const last = times.at(-1);
    if (last !== undefined && s < last) {
      told.tell(
        line,
        `${foundText(written)} lies before the entry above it`,
        "sort the log by time, or take out what was put together",
      );
    } else if (last === undefined || s > last) {
      times.push(s);
      kelvin.push(k);
    }
  }
  told.rest();
  if (problems.length > before) return null;
  if (times.length < 2) {
    problems.push({
      at: name,
      problem: `${countOf(times.length, "entry", "entries")} with a number`,
      fix: "give the whole log",
    });
    return null;
  }
  return { log: { timesS: Float64Array.from(times), kelvin: Float64Array.from(kelvin) }, skipped };
}

const UNIT_FIX = "check the column and `unit` of thermometry";

/** What is wrong with a time, and what to do about it. */
export function timeFault(fault: "no-zone" | "twice" | "never" | "no-time", written: string): [string, string] {
  const found = foundText(written);
  if (fault === "no-zone") {
    return [
      `the time ${found} has no offset from UTC, and the scans must be matched with the log`,
      `write ${plainText(written)}+02:00 with your offset, or add to thermometry \`time_zone: "+02:00"\` or the name of a zone such as Europe/Paris`,
    ];
  }
  if (fault === "twice")
    return [`the clock showed ${found} twice that day`, "write it with its offset, for example +02:00"];
  if (fault === "never") return [`the clock never showed ${found}: it was put forward`, "check the time and time_zone"];
  return [`the time is ${found}; expected ISO 8601`, "write for example 2024-05-17T09:30:00+02:00"];
}

class Teller {
  readonly #name: string;
  readonly #problems: Problem[];
  #count = 0;
  constructor(name: string, problems: Problem[]) {
    this.#name = name;
    this.#problems = problems;
  }
  tell(line: number, problem: string, fix: string): void {
    if (++this.#count <= MOST_TOLD) this.#problems.push({ at: `${this.#name}:${line}`, problem, fix });
  }
  rest(): void {
    const more = this.#count - MOST_TOLD;
    if (more <= 0) return;
    this.#problems.push({
      at: this.#name,
      problem: `and ${countOf(more, "line")} more`,
      fix: "mend the first ones first",
    });
  }
}

interface LogRecord {
  readonly line: number;
  readonly cells: readonly string[];
}

function recordsOf(text: string, name: string, problems: Problem[]): LogRecord[] | null {
  const head = text.split(/\r?\n/, 200).find((l) => l.trim() !== "" && !l.trimStart().startsWith("#")) ?? "";
  const delimiter = ["\t", ";", ","].find((d) => head.includes(d)) ?? ",";
  try {
    const records: LogRecord[] = [];
    parse(text, {
      bom: true,
      delimiter,
      comment: "#",
      comment_no_infix: true,
      record_delimiter: ["\r\n", "\n", "\r"],
      skip_empty_lines: true,
      relax_column_count: true,
      to: MAX_ENTRIES,
      on_record: (cells: string[], context) => {
        records.push({ line: context.lines, cells });
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
