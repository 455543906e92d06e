import { existsSync, readFileSync, statSync } from "node:fs";
import type { Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { parseFramesTable } from "./frames_table.js";
import { systemWords } from "./image_file.js";
import { IMAGE_KEYS, type ImageKey, type SeriesEntry } from "./schema.js";
import { signalProblem } from "./signal_form.js";
import { parseTime } from "./times.js";
import { locate, splitPath, withPage } from "./source_path.js";
import type { Step, YamlDocument } from "./yaml_document.js";

/** One image of one frame as written; `page` null where the file itself must say (a stack of one). */
export interface WrittenSource {
  /** Absolute path. */
  readonly path: string;
  readonly written: string;
  readonly dataset: string | null;
  readonly page: number | null;
  readonly sample: number | null;
  /** Where it was written, for messages. */
  readonly at: string;
}

/** A frame before its images are looked at. */
export interface WrittenFrame {
  /** null where the log of the thermometer has to say it. */
  readonly temperatureK: number | null;
  readonly sources: Partial<Record<ImageKey, WrittenSource>>;
  /** Where the frame stands, for messages. */
  readonly at: string;
  readonly startedAt: string | null;
  readonly endedAt: string | null;
  readonly stageXNm: number | null;
  readonly stageYNm: number | null;
}

interface ScanTimes {
  readonly startedAt: string;
  readonly endedAt: string;
}

/** A stack, which must hold one page a temperature. */
export interface WrittenStack extends WrittenSource {
  readonly image: ImageKey;
}

export interface WrittenStacks {
  readonly stacks: readonly WrittenStack[];
  /** null where they are left out: the file itself may say them, or the log of the thermometer. */
  readonly temperaturesK: readonly number[] | null;
  /** Begin and end of each page's scan; null where they are left out. */
  readonly times: readonly ScanTimes[] | null;
  /** Where the series stands, for messages. */
  readonly at: string;
}

export interface WrittenSeries {
  /** Of a table; those of stacks are made when the pages are known. */
  readonly frames: readonly WrittenFrame[];
  readonly stacks: WrittenStacks | null;
  /** Absolute path and content of the frames table. */
  readonly table: { readonly path: string; readonly bytes: Buffer } | null;
  /** Absolute path of a frames table that is not there yet. */
  readonly awaited?: string;
}

export interface SeriesContext {
  readonly doc: YamlDocument;
  /** The YAML file's folder, absolute. */
  readonly folder: string;
  readonly allowOutside: boolean;
  readonly problems: Problem[];
  /** Temperatures come from a log. */
  readonly fromLog: boolean;
  /** Of a run that goes on: tables that are not there yet, or hold no row, are told here and are no problem. */
  readonly waiting: Problem[] | null;
}

const MAX_TABLE_BYTES = 16 * 1024 * 1024;

/** The frames of one series, from its stacks or its table. Problems are appended to `context.problems`. */
export function writtenSeries(entry: SeriesEntry, path: readonly Step[], context: SeriesContext): WrittenSeries {
  const { doc, problems } = context;
  const none: WrittenSeries = { frames: [], stacks: null, table: null };
  if ((entry.stacks === undefined) === (entry.frames === undefined)) {
    const both = entry.stacks !== undefined;
    problems.push({
      at: both ? doc.atKey(path, "frames") : doc.at(path),
      problem: both ? "a series with both stacks and frames" : "a series with neither stacks nor frames",
      fix: "give `stacks` with `temperatures_K`, or `frames` with a table, not both",
    });
    return none;
  }
  if (entry.stacks !== undefined) return stackSeries(entry.stacks, entry, path, context);
  for (const key of ["temperatures_K", "started_at", "ended_at"] as const) {
    if (entry[key] === undefined) continue;
    problems.push({
      at: doc.atKey(path, key),
      problem: `${key} beside frames: the table holds ${key === "temperatures_K" ? "the temperatures" : "the times"}`,
      fix: `take ${key} out`,
    });
  }
  return entry.frames === undefined ? none : tableSeries(entry.frames, path, context);
}

function stackSeries(
  stacks: NonNullable<SeriesEntry["stacks"]>,
  entry: SeriesEntry,
  path: readonly Step[],
  context: SeriesContext,
): WrittenSeries {
  const { doc, problems } = context;
  const wrong = signalProblem(stacks);
  const at = doc.at([...path, "stacks"]);
  if (wrong === "none") {
    const name = `${path.map((s) => (typeof s === "number" ? `[${s}]` : s)).join("")}.stacks.amplitude`;
    problems.push({
      at,
      problem: `${name} is missing; expected the name of an image file`,
      fix: "the amplitude is required: give its file (or `signal`, or `real` and `imaginary`)",
    });
  } else if (wrong !== null) problems.push({ at, ...wrong });
  const found: WrittenStack[] = [];
  for (const image of IMAGE_KEYS) {
    const written = stacks[image];
    if (written === undefined) continue;
    const at = doc.at([...path, "stacks", image]);
    const { file, dataset, page, sample } = splitPath(written);
    if (page !== null) {
      problems.push({
        at,
        problem: `"${plainText(written)}" names one page; a stack gives all of its pages`,
        fix: `write "${plainText(withPage(written, null))}", or use a frames table`,
      });
      continue;
    }
    const place = locate(context.folder, file, context.allowOutside);
    if ("refused" in place) {
      problems.push({ at, problem: `${image} is ${place.refused}: "${plainText(written)}"`, fix: place.fix });
      continue;
    }
    found.push({ image, path: place.path, written, dataset, page: null, sample, at });
  }
  const temperaturesK = entry.temperatures_K ?? null;
  const times = scanTimes(entry, temperaturesK, path, context);
  const stacked = { stacks: found, temperaturesK, times, at: doc.at(path) };
  return { frames: [], stacks: stacked, table: null };
}

/** The times of a stack's scans. Problems are appended; null where there are none, or they cannot be used. */
function scanTimes(
  entry: SeriesEntry,
  temperaturesK: readonly number[] | null,
  path: readonly Step[],
  { doc, problems }: SeriesContext,
): ScanTimes[] | null {
  const { started_at: started, ended_at: ended } = entry;
  if (started === undefined && ended === undefined) return null;
  if (started === undefined || ended === undefined) {
    const [there, missing] = started === undefined ? ["ended_at", "started_at"] : ["started_at", "ended_at"];
    problems.push({ at: doc.atKey(path, there), problem: `${there} without ${missing}`, fix: "give both, or neither" });
    return null;
  }
  const pages = temperaturesK?.length ?? started.length;
  for (const [key, times] of [["started_at", started] as const, ["ended_at", ended] as const]) {
    if (times.length === pages) continue;
    problems.push({
      at: doc.atKey(path, key),
      problem: `${countOf(times.length, "time")} in ${key}, ${pages} in ${temperaturesK === null ? "started_at" : "temperatures_K"}`,
      fix: "give one time a page",
    });
    return null;
  }
  const back = started.findIndex((s, k) => parseTime(ended[k]) < parseTime(s));
  if (back >= 0) {
    const at = doc.at([...path, "ended_at", back]);
    problems.push({ at, problem: "ended_at lies before started_at", fix: "mend the times" });
    return null;
  }
  return started.map((startedAt, k) => ({ startedAt, endedAt: ended[k] }));
}

/**
 * One frame a temperature (null: the log of the thermometer has it), from the pages of the stacks in their order.
 * @param bySample stacks whose images are the samples of one page
 */
export function framesOfStacks(
  s: WrittenStacks,
  temperaturesK: readonly (number | null)[],
  bySample: ReadonlySet<ImageKey>,
): WrittenFrame[] {
  return temperaturesK.map((temperatureK, page): WrittenFrame => {
    const sources: Partial<Record<ImageKey, WrittenSource>> = {};
    for (const stack of s.stacks) {
      sources[stack.image] = bySample.has(stack.image)
        ? { ...stack, written: `${withPage(stack.written, 0)}:${page}`, page: 0, sample: page }
        : { ...stack, written: withPage(stack.written, page), page };
    }
    const times = s.times?.[page] ?? { startedAt: null, endedAt: null };
    return { temperatureK, sources, at: s.at, ...times, stageXNm: null, stageYNm: null };
  });
}

function tableSeries(written: string, path: readonly Step[], context: SeriesContext): WrittenSeries {
  const { doc, problems, folder, allowOutside } = context;
  const none: WrittenSeries = { frames: [], stacks: null, table: null };
  const at = doc.at([...path, "frames"]);
  const place = locate(folder, written, allowOutside);
  if ("refused" in place) {
    problems.push({ at, problem: `frames is ${place.refused}: "${plainText(written)}"`, fix: place.fix });
    return none;
  }
  const name = plainText(written);
  let bytes: Buffer;
  try {
    bytes = readTextFile(place.path, MAX_TABLE_BYTES);
  } catch (e) {
    const problem = { at: name, problem: systemWords(e), fix: `check the name of the table, written at ${at}` };
    const awaited = context.waiting !== null && !existsSync(place.path);
    (awaited && context.waiting !== null ? context.waiting : problems).push(problem);
    return awaited ? { ...none, awaited: place.path } : none;
  }
  const before = problems.length;
  const rows = parseFramesTable(bytes.toString("utf8"), name, problems, context.fromLog, context.waiting ?? problems);
  const frames = rows.map((row): WrittenFrame => {
    const sources: Partial<Record<ImageKey, WrittenSource>> = {};
    const line = `${name}:${row.line}`;
    for (const image of IMAGE_KEYS) {
      const cell = row.paths[image];
      if (cell === undefined) continue;
      const { file, dataset, page, sample } = splitPath(cell);
      const where = locate(folder, file, allowOutside);
      if ("refused" in where) {
        problems.push({ at: line, problem: `${image} is ${where.refused}: "${plainText(cell)}"`, fix: where.fix });
      } else sources[image] = { path: where.path, written: cell, dataset, page, sample, at: line };
    }
    const { temperatureK, startedAt, endedAt, stageXNm, stageYNm } = row;
    return { temperatureK, sources, at: line, startedAt, endedAt, stageXNm, stageYNm };
  });
  const most = 60;
  if (problems.length - before > most) {
    const dropped = problems.length - before - most;
    problems.length = before + most;
    problems.push({ at: name, problem: `and ${countOf(dropped, "problem")} more`, fix: "mend the first ones first" });
  }
  return { frames, stacks: null, table: { path: place.path, bytes } };
}

/** A small text file. Throws where it is missing, not a regular file, or larger than `most` bytes. */
export function readTextFile(path: string, most: number): Buffer {
  const stat = statSync(path);
  if (!stat.isFile()) throw new Error(stat.isDirectory() ? "a folder, not a file" : "not a file");
  if (stat.size > most) throw new Error(`${stat.size} bytes; expected a text file of at most ${most}`);
  return readFileSync(path);
}
