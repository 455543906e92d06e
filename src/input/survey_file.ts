import { dirname, resolve } from "node:path";
import type { Cooldown, FrameInfo, Notice, SourceFile } from "../model/cooldown.js";
import { InputError, type Problem } from "../model/errors.js";
import type { PixelSize } from "../model/raster.js";
import { plainText } from "../model/text.js";
import { checkImages } from "./check_images.js";
import { crossProblems } from "./cross_checks.js";
import { renumberExclusions, withExclusions } from "./exclusions.js";
import { systemWords } from "./image_file.js";
import { HeaderBook } from "./image_headers.js";
import { numberFrames } from "./number_frames.js";
import { findPixelSize } from "./pixel_size.js";
import { cooldownSchema, excludeSchema, seriesSchema, thermometrySchema, type CooldownEntry } from "./schema.js";
import type { SeriesEntry } from "./schema.js";
import { schemaProblems } from "./schema_problems.js";
import { readTextFile, writtenSeries, type WrittenSeries } from "./series_frames.js";
import { hashFile, imageFiles, sourceOf } from "./source_files.js";
import { shownPath } from "./source_path.js";
import { hashLog, readThermometry, temperaturesFromLog, type Thermometry } from "./thermometry.js";
import { tipProblems } from "./tip_size.js";
import { channelScales, photonEnergyMeV } from "./units.js";
import { isRecord, parseYaml, type YamlDocument } from "./yaml_document.js";

export interface ReadOptions {
  /** Follow paths that leave the YAML file's folder. Default false. */
  readonly allowOutside?: boolean;
  /** Read every file once for its SHA-256; without it `sources` is empty. Default true. */
  readonly hashSources?: boolean;
  /** The run goes on: what is described but not yet there, or not yet whole, is told in `waiting` and left out. Default false. */
  readonly growing?: boolean;
}

/** What was found of a cooldown, sound or not. */
export interface Survey {
  /** null where there is a problem. */
  readonly cooldown: Cooldown | null;
  readonly problems: readonly Problem[];
  /** The frames whose images can be read, also where something else is wrong; numbered as far as they were found. */
  readonly frames: readonly FrameInfo[];
  readonly pixel: PixelSize | null;
  readonly notices: readonly Notice[];
  /** What is still to come, where the run goes on. */
  readonly waiting: readonly Problem[];
  /** Absolute paths of all files that are read or named, whether they are there or not. */
  readonly named: readonly string[];
}

/** What was found in one YAML file. */
export interface FileSurvey extends Survey {
  readonly doc: YamlDocument;
}

/** Reads one YAML file, its frame tables and the headers of its images. What is odd about the order of its frames is not yet told.
 *  Throws InputError only where the file is no YAML at all. */
export async function surveyFile(yamlFile: string, options: ReadOptions): Promise<FileSurvey> {
  const yamlPath = resolve(yamlFile);
  const folder = dirname(yamlPath);
  const yaml = readYaml(yamlPath, yamlFile);
  refuseBinary(yaml, yamlFile);
  const doc = parseYaml(yaml.toString("utf8"), plainText(yamlFile));
  const whole = cooldownSchema.safeParse(doc.value);
  const problems: Problem[] = whole.success ? [] : schemaProblems(whole.error.issues, doc);
  problems.push(...crossProblems(doc));
  const notices: Notice[] = [];

  // Each part that is sound in itself is followed to its files even where something else is wrong: all is told in one go.
  const top = isRecord(doc.value) ? doc.value : {};
  const { channels, scan, tip } = cooldownSchema.shape;
  const thermometryEntry = thermometrySchema.safeParse(top["thermometry"]).data;
  const waiting: Problem[] | null = options.growing === true ? [] : null;
  const context = {
    doc,
    folder,
    allowOutside: options.allowOutside ?? false,
    problems,
    fromLog: top["thermometry"] !== undefined,
    waiting,
  };
  const thermometry = thermometryEntry === undefined ? null : readThermometry(thermometryEntry, context);
  const entries = seriesEntries(doc);
  const written = entries.map((s) => writtenSeries(s.entry, ["series", s.index], context));
  const headers = new HeaderBook(waiting ?? problems, notices);
  const scales = channelScales(channels.safeParse(top["channels"]).data);
  const { fromLog } = context;
  const found = await checkImages(written, { scales, headers, problems, notices, fromLog, waiting });
  // A series that has not begun is none yet.
  const begun = entries.flatMap((_, k) => (waiting !== null && found[k].frames.length === 0 ? [] : [k]));
  const checked = begun.map((k) => found[k].frames);
  const pixel = findPixelSize(scan.safeParse(top["scan"]).data, headers.pixelClaims, doc, problems, notices);
  const temperatures = thermometry === null ? [] : temperaturesFromLog(checked.flat(), thermometry, problems, notices);

  const series = begun.map((k) => ({ index: entries[k].index, branch: entries[k].entry.branch }));
  const numbered = numberFrames(series, checked, temperatures);
  // Numbers of frames mean something only where none is missing.
  const excluded = problems.length > 0 ? [] : (excludeSchema.safeParse(top["exclude"]).data ?? []);
  const exclusions = waiting === null ? excluded : renumberExclusions(excluded, found);
  const frames = withExclusions(numbered, exclusions, pixel, doc, problems);
  problems.push(...tipProblems(tip.safeParse(top["tip"]).data, frames, pixel, doc));
  problems.sort(byPlace(plainText(yamlFile)));
  const named = [yamlPath, ...(thermometry === null ? [] : [thermometry.path]), ...namedFiles(written)];
  const survey = { problems, frames, pixel, notices, doc, waiting: waiting ?? [], named };
  if (problems.length > 0 || !whole.success || pixel === null) return { ...survey, cooldown: null };
  const sources =
    options.hashSources === false ? [] : await hashAll(yamlPath, folder, yaml, written, thermometry, frames);
  const cooldown = { ...described(whole.data), pixel, yamlFile: yamlPath, frames, sources, notices };
  return { ...survey, cooldown };
}

/** Problems of the YAML file first, in its order; the others as they came. */
function byPlace(yamlName: string): (a: Problem, b: Problem) => number {
  const place = (p: Problem): number => {
    const m = p.at.startsWith(`${yamlName}:`) ? /:(\d+):(\d+)$/.exec(p.at) : null;
    return m === null ? Infinity : Number(m[1]) * 1e5 + Number(m[2]);
  };
  return (a, b) => {
    const [x, y] = [place(a), place(b)];
    return x === y ? 0 : x - y;
  };
}

function readYaml(path: string, shown: string): Buffer {
  try {
    return readTextFile(path, 16 * 1024 * 1024);
  } catch (e) {
    const fix = "give the path of a cooldown.yaml";
    throw new InputError({ at: plainText(shown), problem: systemWords(e), fix }, e);
  }
}

/** Bytes that no text has: an image, an archive or UTF-16, whatever its name says. */
function refuseBinary(content: Buffer, shown: string): void {
  const at = content.findIndex((b) => b === 0 || (b < 0x20 && b !== 9 && b !== 10 && b !== 13) || b === 0x7f);
  if (at < 0) return;
  const byte = content[at].toString(16).padStart(2, "0");
  throw new InputError({
    at: plainText(shown),
    problem: `not text: byte ${at} is 0x${byte}; expected a cooldown.yaml in UTF-8`,
    fix: "give the file that describes the cooldown, saved as plain text",
  });
}

interface IndexedEntry {
  readonly index: number;
  readonly entry: SeriesEntry;
}

function seriesEntries(doc: YamlDocument): IndexedEntry[] {
  const value = doc.value;
  if (typeof value !== "object" || value === null || !("series" in value) || !Array.isArray(value.series)) return [];
  return value.series.flatMap((raw: unknown, index) => {
    const parsed = seriesSchema.safeParse(raw);
    return parsed.success ? [{ index, entry: parsed.data }] : [];
  });
}

/** Tables and images, as far as they are named. */
function namedFiles(written: readonly WrittenSeries[]): string[] {
  return written.flatMap((s) => [
    ...(s.table === null ? [] : [s.table.path]),
    ...(s.awaited === undefined ? [] : [s.awaited]),
    ...(s.stacks?.stacks ?? []).map((stack) => stack.path),
    ...s.frames.flatMap((f) => Object.values(f.sources).map((source) => source.path)),
  ]);
}

function described(y: CooldownEntry): Omit<Cooldown, "yamlFile" | "pixel" | "frames" | "sources" | "notices"> {
  return {
    sample: y.sample,
    cooldown: y.cooldown,
    region: y.region ?? null,
    tip:
      y.tip === undefined ? null : { resolutionNm: y.tip.resolution_nm, resolutionSdNm: y.tip.resolution_sd_nm ?? 0 },
    photonEnergyMeV: photonEnergyMeV(y.light),
    filmThicknessNm: y.film?.thickness_nm ?? null,
    amplitudeUnit: y.channels?.amplitude?.unit ?? "",
    amplitudeHarmonic: y.channels?.amplitude?.harmonic ?? null,
  };
}

/** The YAML file, the tables, the log and the images, each file once, in the order in which they are named. */
async function hashAll(
  yamlPath: string,
  folder: string,
  yaml: Buffer,
  written: readonly WrittenSeries[],
  thermometry: Thermometry | null,
  frames: readonly FrameInfo[],
): Promise<SourceFile[]> {
  const out = new Map<string, SourceFile>([[yamlPath, sourceOf(yamlPath, folder, yaml)]]);
  for (const s of written) if (s.table !== null) out.set(s.table.path, sourceOf(s.table.path, folder, s.table.bytes));
  if (thermometry !== null && !out.has(thermometry.path)) out.set(thermometry.path, await hashLog(thermometry, folder));
  for (const file of imageFiles(frames)) {
    if (!out.has(file)) out.set(file, await hashFile(file, shownPath(folder, file)));
  }
  return [...out.values()];
}
