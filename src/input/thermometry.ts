import type { Notice, SourceFile } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { ImageFileError } from "./byte_file.js";
import type { CheckedFrame } from "./check_frame.js";
import { systemWords } from "./image_file.js";
import { scanTemperature, type TemperatureLog } from "./scan_temperature.js";
import type { ThermometryEntry } from "./schema.js";
import { hashFile } from "./source_files.js";
import { locate, shownPath } from "./source_path.js";
import { parseTemperatureLog, timeFault } from "./temperature_log.js";
import { readText } from "./text_matrix.js";
import { instant, timeZone, type TimeZone } from "./times.js";
import type { YamlDocument } from "./yaml_document.js";

/** The log of a thermometer, read; null zone: none stated. */
export interface Thermometry {
  readonly log: TemperatureLog;
  readonly zone: TimeZone | null;
  readonly lagS: number;
  readonly path: string;
  readonly name: string;
  readonly skipped: number;
}

/** Temperatures of one scan as they go into the frame. */
export interface ScanTemperatures {
  readonly temperatureK: number;
  readonly temperatureSdK: number;
  readonly rampKPerS: number;
  readonly lagShiftK: number;
}

const MAX_LOG_BYTES = 256 * 1024 * 1024;
/** Beyond this the table and the log do not mean the same frame. */
const DIFFERS_K = 0.5;
/** As many time constants after the log's beginning the sample has forgotten how it began. */
const SETTLED = 5;

/** Reads the log that `thermometry` names. Problems are appended; null where there is one. */
export function readThermometry(
  entry: ThermometryEntry,
  context: {
    readonly doc: YamlDocument;
    readonly folder: string;
    readonly allowOutside: boolean;
    readonly problems: Problem[];
  },
): Thermometry | null {
  const { doc, folder, allowOutside, problems } = context;
  const at = doc.at(["thermometry", "log"]);
  const zone = entry.time_zone === undefined ? null : timeZone(entry.time_zone);
  if (entry.time_zone !== undefined && zone === null) {
    problems.push({
      at: doc.at(["thermometry", "time_zone"]),
      problem: `no time zone "${plainText(entry.time_zone)}"`,
      fix: 'write for example `time_zone: "+02:00"` or `time_zone: Europe/Paris`',
    });
    return null;
  }
  const place = locate(folder, entry.log, allowOutside);
  const name = plainText(entry.log);
  if ("refused" in place) {
    problems.push({ at, problem: `log is ${place.refused}: "${name}"`, fix: place.fix });
    return null;
  }
  let text: string;
  try {
    text = readText(place.path, MAX_LOG_BYTES);
  } catch (e) {
    const fix = e instanceof ImageFileError ? e.fix : `check the name of the log, written at ${at}`;
    problems.push({ at: name, problem: systemWords(e), fix });
    return null;
  }
  const parsed = parseTemperatureLog(text, entry, zone, name, problems);
  return parsed === null ? null : { ...parsed, zone, lagS: entry.lag_s ?? 0, path: place.path, name };
}

export const hashLog = (t: Thermometry, folder: string): Promise<SourceFile> =>
  hashFile(t.path, shownPath(folder, t.path));

/**
 * The temperature of each frame from the log. A frame without times, or outside the log, keeps the temperature it was given, and that is
 * told; without one it is a problem.
 * @returns an entry a frame, null where the frame keeps its own
 */
export function temperaturesFromLog(
  frames: readonly CheckedFrame[],
  t: Thermometry,
  problems: Problem[],
  notices: Notice[],
): (ScanTemperatures | null)[] {
  const faults = new Map<
    string,
    { at: string; written: string; count: number; fault: "no-zone" | "twice" | "never" | "no-time" }
  >();
  let timeless = 0;
  const out = frames.map(({ written }, frame): ScanTemperatures | null => {
    const own = written.temperatureK;
    const keep = (code: string, why: string): null => {
      if (own !== null) {
        notices.push({ frame, code, message: `${why}: ${own} K as given, not from the log` });
      } else
        problems.push({
          at: written.at,
          problem: why,
          fix: "give temperature_K for this frame, or the log that covers it",
        });
      return null;
    };
    if (written.startedAt === null || written.endedAt === null) {
      if (own === null) return keep("no-scan-times", "no started_at and ended_at to look up in the log");
      timeless++;
      return null;
    }
    const spans = [written.startedAt, written.endedAt].map((time) => {
      const result = instant(time, t.zone);
      if ("ms" in result) return result.ms / 1000;
      const known = faults.get(result.fault);
      if (known === undefined)
        faults.set(result.fault, { at: written.at, written: time, count: 1, fault: result.fault });
      else known.count++;
      return NaN;
    });
    if (spans.some(Number.isNaN)) return null;
    const [startS = NaN, endS = NaN] = spans;
    const scan = scanTemperature(t.log, startS, endS, t.lagS);
    if (scan === null)
      return keep(
        "outside-log",
        `the scan from ${written.startedAt} to ${written.endedAt} does not lie inside the log, ${spanOf(t.log)}`,
      );
    if (t.lagS > 0 && startS < t.log.timesS[0] + SETTLED * t.lagS) {
      notices.push({
        frame,
        code: "log-starts-late",
        message: "the log begins too shortly before the scan for the lag to be known",
      });
    }
    const usual = (t.log.timesS[t.log.timesS.length - 1] - t.log.timesS[0]) / (t.log.timesS.length - 1);
    if (scan.longestGapS > 10 * usual && scan.longestGapS > 0.25 * (endS - startS)) {
      const gapS = String(Math.round(scan.longestGapS));
      const message = `no entry in the log for ${gapS} s of the scan's time: a straight line is taken`;
      notices.push({ frame, code: "log-gap", message, varies: [gapS] });
    }
    if (own !== null && Math.abs(scan.meanK - own) > Math.max(DIFFERS_K, 3 * scan.sdK)) {
      notices.push({
        frame,
        code: "temperature-differs",
        message: `${round(scan.meanK)} K by the log, ${own} K as given: the log's is used`,
        varies: [String(round(scan.meanK)), String(own)],
      });
    }
    return {
      temperatureK: scan.meanK,
      temperatureSdK: scan.sdK,
      rampKPerS: scan.rampKPerS,
      lagShiftK: scan.lagShiftK,
    };
  });
  for (const f of faults.values()) {
    const [problem, fix] = timeFault(f.fault, f.written);
    problems.push({
      at: f.at,
      problem: `${problem}${f.count > 1 ? ` (and ${countOf(f.count - 1, "time")} more)` : ""}`,
      fix,
    });
  }
  if (timeless > 0) {
    const message = `${countOf(timeless, "frame")} without started_at and ended_at: temperatures as given, not from the log`;
    notices.push({ frame: null, code: "no-scan-times", message });
  }
  if (t.skipped > 0) {
    notices.push({
      frame: null,
      code: "log-skipped",
      message: `${countOf(t.skipped, "line")} of ${t.name} without a temperature left out`,
    });
  }
  return out;
}

function spanOf(log: TemperatureLog): string {
  const iso = (s: number | undefined): string => new Date((s ?? 0) * 1000).toISOString().replace(/\.\d+Z$/, "Z");
  return `${iso(log.timesS[0])} to ${iso(log.timesS.at(-1))}`;
}

const round = (x: number): number => Number(x.toFixed(3));
