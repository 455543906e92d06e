import type { Cooldown, FrameInfo, Notice } from "../model/cooldown.js";
import type { CleanFrame } from "../model/signal.js";
import { frameDigest, imagesDigest, inspectFrame, loadFrame } from "../input/index.js";
import type { Settings } from "../settings.js";
import { cleanFrame, type CleanReport } from "../stages/clean/index.js";
import { prepareForDrift, type DriftImage } from "../stages/drift/index.js";
import type { CacheUse } from "./cache_folder.js";
import { keepInCache, keepScratchInCache, kept, keyOf, scratchFromCache } from "./cached.js";
import { drop, fetchClean, fetchKept, isKept, keep, keepClean } from "./scratch.js";

/** What every task needs to know of the run. */
export interface Run {
  readonly scratch: string;
  readonly cache: CacheUse | null;
}

/** Where a frame comes from, and how it is cleaned. */
export interface FrameOrigin {
  readonly pixel: Cooldown["pixel"];
  readonly info: FrameInfo;
  readonly settings: Pick<Settings, "clean">;
}

/** A frame that has been looked at. */
export interface FrameSource extends FrameOrigin {
  /** Of the frame as cleaned: equal keys, equal pixels. */
  readonly key: string;
}

export interface CleanInput extends Run, FrameOrigin {
  readonly settings: Pick<Settings, "clean" | "drift">;
}
export interface CleanOutput {
  readonly imagesSha256: string;
  readonly report: CleanReport;
  readonly notices: readonly Notice[];
  /** See `FrameSource`. */
  readonly key: string;
}

/** Reads one frame and cleans it, unless the same pixels were cleaned before. Its rasters and its registration image are in the scratch
 *  folder then, or can be had by `cleanOf` and `driftImageOf`. */
export async function clean(input: CleanInput): Promise<CleanOutput> {
  const { cache, info, pixel, settings } = input;
  const raw = await loadFrame(input, info);
  const notices = inspectFrame(raw, info);
  const values = frameDigest(raw);
  const whole = info.excluded === undefined && (info.excludedRegions ?? []).length === 0;
  const key = keyOf(cache, "clean", {
    frame: info.frame,
    values,
    // A channel without an image is missing, whatever its file holds.
    retraceNoise: raw.retraceNoise ?? {},
    pixel,
    settings: settings.clean,
  });
  let report = kept<CleanReport>(cache, "clean", key);
  if (report === null) {
    const made = cleanFrame(raw, settings.clean);
    report = made.report;
    keepClean(input.scratch, made.clean);
    keep(input.scratch, driftName(info.frame), prepareForDrift(made.clean, settings.drift));
    keepRaster(input, info.frame, key);
    keepInCache(cache, "clean", key, report);
  }
  return {
    imagesSha256: whole ? values : await imagesDigest(input, info, raw),
    report,
    notices: [...notices, ...report.notices],
    key,
  };
}

const cleanName = (frame: number): string => `clean-${frame}`;
const driftName = (frame: number): string => `drift-${frame}`;

function keepRaster(run: Run, frame: number, key: string): void {
  if (run.cache?.rasters === true) keepScratchInCache(run.cache, "raster", key, run.scratch, cleanName(frame));
}

/** The clean frame: from the scratch folder, from the cache, or from its files once more. */
export async function cleanOf(run: Run, source: FrameSource): Promise<CleanFrame> {
  const { frame } = source.info;
  const name = cleanName(frame);
  if (!isKept(run.scratch, name) && !scratchFromCache(run.cache, "raster", source.key, run.scratch, name)) {
    const made = cleanFrame(await loadFrame(source, source.info), source.settings.clean);
    keepClean(run.scratch, made.clean);
    keepRaster(run, frame, source.key);
  }
  return fetchClean(run.scratch, frame);
}

/** What the frame gives to registration. */
export async function driftImageOf(
  run: Run,
  source: FrameSource,
  settings: Pick<Settings, "drift">,
): Promise<DriftImage> {
  const name = driftName(source.info.frame);
  if (!isKept(run.scratch, name)) keep(run.scratch, name, prepareForDrift(await cleanOf(run, source), settings.drift));
  return fetchKept<DriftImage>(run.scratch, name);
}

/** What registration took from the frames is not needed any more. */
export function dropDriftImages(run: Run, frames: number): void {
  for (let frame = 0; frame < frames; frame++) drop(run.scratch, driftName(frame));
}

/** A frame that is done takes up no more of the disk. */
export const dropClean = (run: Run, frame: number): void => drop(run.scratch, cleanName(frame));
