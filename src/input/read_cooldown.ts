import { dirname, resolve } from "node:path";
import { CHANNELS, type Cooldown, type FrameInfo, type SourceFile } from "../model/cooldown.js";
import { InputError, type Problem } from "../model/errors.js";
import { plainText } from "../model/text.js";
import { checkImages, type CheckedFrame } from "./check_images.js";
import { checkOrder } from "./check_order.js";
import { crossProblems } from "./cross_checks.js";
import { cycleNumbers } from "./cycles.js";
import { systemWords } from "./image_file.js";
import { cooldownSchema, seriesSchema, type CooldownEntry, type SeriesEntry } from "./schema.js";
import { schemaProblems } from "./schema_problems.js";
import { readTextFile, writtenSeries, type WrittenSeries } from "./series_frames.js";
import { hashFile, sourceOf } from "./source_files.js";
import { shownPath } from "./source_path.js";
import { channelScales, photonEnergyMeV } from "./units.js";
import { parseYaml, type YamlDocument } from "./yaml_document.js";

export interface ReadOptions {
  /** Follow paths that leave the YAML file's folder. Default false. */
  readonly allowOutside?: boolean;
  /** Read every file once for its SHA-256; without it `sources` is empty. Default true. */
  readonly hashSources?: boolean;
}

/**
 * Reads a `cooldown.yaml`, its frame tables and the headers of its images, and checks all of it; no pixel is read. Frames stand in
 * the order of the YAML file, units are nm, K, meV, and each source carries the factor that takes its file to nm or rad.
 * Throws one InputError with every problem found: place in the file, what was found and expected, what to do.
 */
export async function readCooldown(yamlFile: string, options: ReadOptions = {}): Promise<Cooldown> {
  const yamlPath = resolve(yamlFile);
  const folder = dirname(yamlPath);
  const yaml = readYaml(yamlPath, yamlFile);
  const doc = parseYaml(yaml.toString("utf8"), plainText(yamlFile));
  const whole = cooldownSchema.safeParse(doc.value);
  const problems: Problem[] = whole.success ? [] : schemaProblems(whole.error.issues, doc);
  problems.push(...crossProblems(doc));

  // Each series that is sound in itself is followed to its files even where something else is wrong: all is told in one go.
  const entries = seriesEntries(doc);
  const context = { doc, folder, allowOutside: options.allowOutside ?? false, problems };
  const written = entries.map((s) => writtenSeries(s.entry, ["series", s.index], context));
  const scales = channelScales(whole.success ? whole.data.channels : undefined);
  const checked = await checkImages(written, scales, problems);
  if (problems.length > 0 || !whole.success) throw new InputError(problems.sort(byPlace(plainText(yamlFile))));

  const frames = numberFrames(entries, checked);
  return {
    ...described(whole.data),
    yamlFile: yamlPath,
    frames,
    sources: options.hashSources === false ? [] : await hashAll(yamlPath, folder, yaml, written, frames),
    notices: checkOrder(frames, pixelOf(whole.data), whole.data.tip?.resolution_nm ?? null),
  };
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

const pixelOf = (y: CooldownEntry): Cooldown["pixel"] => ({
  xNm: y.scan.pixel_size_nm[0],
  yNm: y.scan.pixel_size_nm[1],
});

function described(y: CooldownEntry): Omit<Cooldown, "yamlFile" | "frames" | "sources" | "notices"> {
  return {
    sample: y.sample,
    cooldown: y.cooldown,
    region: y.region ?? null,
    pixel: pixelOf(y),
    tip:
      y.tip === undefined ? null : { resolutionNm: y.tip.resolution_nm, resolutionSdNm: y.tip.resolution_sd_nm ?? 0 },
    photonEnergyMeV: photonEnergyMeV(y.light),
    filmThicknessNm: y.film?.thickness_nm ?? null,
    amplitudeUnit: y.channels?.amplitude?.unit ?? "",
  };
}

function numberFrames(entries: readonly IndexedEntry[], checked: readonly CheckedFrame[][]): FrameInfo[] {
  const temperature = (f: CheckedFrame | undefined): number => f?.written.temperatureK ?? NaN;
  const cycles = cycleNumbers(
    entries.map((s, i) => ({
      branch: s.entry.branch,
      firstK: temperature(checked[i][0]),
      lastK: temperature(checked[i].at(-1)),
    })),
  );
  const frames: FrameInfo[] = [];
  entries.forEach((s, i) => {
    for (const { written, rows, cols, sources } of checked[i]) {
      const { temperatureK, startedAt, endedAt, stageXNm, stageYNm } = written;
      frames.push({
        frame: frames.length,
        series: s.index,
        branch: s.entry.branch,
        cycle: cycles[i],
        temperatureK,
        startedAt,
        endedAt,
        stageXNm,
        stageYNm,
        rows,
        cols,
        sources,
      });
    }
  });
  return frames;
}

/** The YAML file, the tables and the images, each file once, in the order in which they are named. */
async function hashAll(
  yamlPath: string,
  folder: string,
  yaml: Buffer,
  written: readonly WrittenSeries[],
  frames: readonly FrameInfo[],
): Promise<SourceFile[]> {
  const out = new Map<string, SourceFile>([[yamlPath, sourceOf(yamlPath, folder, yaml)]]);
  for (const s of written) if (s.table !== null) out.set(s.table.path, sourceOf(s.table.path, folder, s.table.bytes));
  for (const frame of frames) {
    for (const channel of CHANNELS) {
      const file = frame.sources[channel]?.file;
      if (file !== undefined && !out.has(file)) out.set(file, await hashFile(file, shownPath(folder, file)));
    }
  }
  return [...out.values()];
}
