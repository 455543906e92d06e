import { readFileSync, statSync } from "node:fs";
import { CHANNELS, type ChannelName } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { parseFramesTable } from "./frames_table.js";
import { systemWords } from "./image_file.js";
import type { SeriesEntry } from "./schema.js";
import { locate, splitPage } from "./source_path.js";
import type { Step, YamlDocument } from "./yaml_document.js";

/** One channel of one frame as written; `page` null where the file itself must say (a stack of one). */
export interface WrittenSource {
  /** Absolute path. */
  readonly path: string;
  readonly written: string;
  readonly page: number | null;
  /** Where it was written, for messages. */
  readonly at: string;
}

/** A frame before its images are looked at. */
export interface WrittenFrame {
  readonly temperatureK: number;
  readonly sources: Partial<Record<ChannelName, WrittenSource>>;
  readonly startedAt: string | null;
  readonly endedAt: string | null;
  readonly stageXNm: number | null;
  readonly stageYNm: number | null;
}

/** A stack that must hold one page a temperature. */
export interface WrittenStack extends WrittenSource {
  readonly channel: ChannelName;
  readonly temperatures: number;
}

export interface WrittenSeries {
  readonly frames: readonly WrittenFrame[];
  readonly stacks: readonly WrittenStack[];
  /** Absolute path and content of the frames table. */
  readonly table: { readonly path: string; readonly bytes: Buffer } | null;
}

export interface SeriesContext {
  readonly doc: YamlDocument;
  /** The YAML file's folder, absolute. */
  readonly folder: string;
  readonly allowOutside: boolean;
  readonly problems: Problem[];
}

const MAX_TABLE_BYTES = 16 * 1024 * 1024;

/** The frames of one series, from its stacks or its table. Problems are appended to `context.problems`. */
export function writtenSeries(entry: SeriesEntry, path: readonly Step[], context: SeriesContext): WrittenSeries {
  const { doc, problems } = context;
  const none: WrittenSeries = { frames: [], stacks: [], table: null };
  if ((entry.stacks === undefined) === (entry.frames === undefined)) {
    const both = entry.stacks !== undefined;
    problems.push({
      at: both ? doc.atKey(path, "frames") : doc.at(path),
      problem: both ? "a series with both stacks and frames" : "a series with neither stacks nor frames",
      fix: "give `stacks` with `temperatures_K`, or `frames` with a table, not both",
    });
    return none;
  }
  if (entry.stacks !== undefined) return stackSeries(entry.stacks, entry.temperatures_K, path, context);
  if (entry.temperatures_K !== undefined) {
    problems.push({
      at: doc.atKey(path, "temperatures_K"),
      problem: "temperatures_K beside frames: the table holds the temperatures",
      fix: "take temperatures_K out",
    });
  }
  return entry.frames === undefined ? none : tableSeries(entry.frames, path, context);
}

function stackSeries(
  stacks: NonNullable<SeriesEntry["stacks"]>,
  temperatures: readonly number[] | undefined,
  path: readonly Step[],
  context: SeriesContext,
): WrittenSeries {
  const { doc, problems } = context;
  if (temperatures === undefined) {
    problems.push({
      at: doc.at(path),
      problem: "stacks without temperatures_K",
      fix: "add `temperatures_K: [ … ]`, one temperature a page",
    });
  }
  const found: WrittenStack[] = [];
  for (const channel of CHANNELS) {
    const written = stacks[channel];
    if (written === undefined) continue;
    const at = doc.at([...path, "stacks", channel]);
    const { page } = splitPage(written);
    if (page !== null) {
      problems.push({
        at,
        problem: `"${plainText(written)}" names one page; a stack gives all of its pages`,
        fix: `write "${plainText(splitPage(written).file)}", or use a frames table`,
      });
      continue;
    }
    const place = locate(context.folder, written, context.allowOutside);
    if ("refused" in place) {
      problems.push({ at, problem: `${channel} is ${place.refused}: "${plainText(written)}"`, fix: place.fix });
      continue;
    }
    // Without temperatures the file itself is still looked at, so that all its problems are told at once.
    found.push({ channel, path: place.path, written, page: null, at, temperatures: temperatures?.length ?? -1 });
  }
  const frames = (temperatures ?? []).map((temperatureK, page): WrittenFrame => {
    const sources: Partial<Record<ChannelName, WrittenSource>> = {};
    for (const s of found) sources[s.channel] = { path: s.path, written: `${s.written}#${page}`, page, at: s.at };
    return { temperatureK, sources, startedAt: null, endedAt: null, stageXNm: null, stageYNm: null };
  });
  return { frames, stacks: found, table: null };
}

function tableSeries(written: string, path: readonly Step[], context: SeriesContext): WrittenSeries {
  const { doc, problems, folder, allowOutside } = context;
  const none: WrittenSeries = { frames: [], stacks: [], table: null };
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
    problems.push({ at: name, problem: systemWords(e), fix: `check the name of the table, written at ${at}` });
    return none;
  }
  const before = problems.length;
  const rows = parseFramesTable(bytes.toString("utf8"), name, problems);
  const frames = rows.map((row): WrittenFrame => {
    const sources: Partial<Record<ChannelName, WrittenSource>> = {};
    for (const channel of CHANNELS) {
      const cell = row.paths[channel];
      if (cell === undefined) continue;
      const { file, page } = splitPage(cell);
      const where = locate(folder, file, allowOutside);
      const line = `${name}:${row.line}`;
      if ("refused" in where) {
        problems.push({ at: line, problem: `${channel} is ${where.refused}: "${plainText(cell)}"`, fix: where.fix });
      } else sources[channel] = { path: where.path, written: cell, page, at: line };
    }
    const { temperatureK, startedAt, endedAt, stageXNm, stageYNm } = row;
    return { temperatureK, sources, startedAt, endedAt, stageXNm, stageYNm };
  });
  const most = 60;
  if (problems.length - before > most) {
    const dropped = problems.length - before - most;
    problems.length = before + most;
    problems.push({ at: name, problem: `and ${countOf(dropped, "problem")} more`, fix: "mend the first ones first" });
  }
  return { frames, stacks: [], table: { path: place.path, bytes } };
}

/** A small text file. Throws where it is missing, not a regular file, or larger than `most` bytes. */
export function readTextFile(path: string, most: number): Buffer {
  const stat = statSync(path);
  if (!stat.isFile()) throw new Error(stat.isDirectory() ? "a folder, not a file" : "not a file");
  if (stat.size > most) throw new Error(`${stat.size} bytes; expected a text file of at most ${most}`);
  return readFileSync(path);
}
