import type { Analysis, FrameResult } from "./model/analysis.js";
import type { Cooldown, Notice } from "./model/cooldown.js";
import type { DriftPair } from "./model/pictures.js";
import type { Drift, FrameLevels } from "./model/signal.js";
import { median } from "./numerics/quantile.js";
import { childSeed } from "./numerics/random.js";
import { settingRecord, type Settings } from "./settings.js";
import { labelDomains, trackDomains } from "./stages/domains/index.js";
import { choosePairs, furtherPairs, solveDrift, type PairShift } from "./stages/drift/index.js";
import { controlFalseDiscovery, fringeShare } from "./stages/fringes/index.js";
import { checkCourse, findLoops } from "./stages/loops/index.js";
import { trackLevels } from "./stages/states/index.js";
import { checkTip, missingForWidths } from "./stages/walls/index.js";
import { openCache, trimCache, type CacheUse } from "./workers/cache_folder.js";
import { cached, forgetTroubles, keepScratchInCache, keyOf, scratchFromCache, takeTrouble } from "./workers/cached.js";
import { dropDriftImages, type FrameSource, type Run } from "./workers/clean_task.js";
import { DEBRIS_MAP, debrisParts } from "./workers/debris_tasks.js";
import { dropLabels, isPictures, labelledFrame, picturesOf, type MeasureOutput } from "./workers/measure_task.js";
import { makeRunner, type Runner } from "./workers/pool.js";
import { holdScratch, makeScratch, removeScratch } from "./workers/scratch.js";

export interface AnalyseOptions {
  readonly settings: Settings;
  readonly programVersion: string;
  /** Worker threads; 0 = none. The results are the same to the bit for any number. */
  readonly workers: number;
  readonly signal?: AbortSignal;
  /** Where the results of single stages are kept for the next analysis, and how much all of them may be; absent: nowhere. */
  readonly cache?: { readonly folder: string; readonly limitBytes: number } | undefined;
  /** Told once why the cache cannot be used as it should. The analysis goes on without, and comes out the same. */
  readonly onCacheTrouble?: (trouble: string) => void;
  /** Called as the work goes on: what is being done, and how far the whole has come. */
  readonly onProgress?: (stage: string, done: number, total: number) => void;
  /** Called as each stage begins, for measuring. */
  readonly onStage?: (stage: string) => void;
}

/** The whole way of one cooldown, from described files to an analysis. Nothing is written but a scratch folder, of which the pictures wait to
 *  be stored (see `Analysis.release`), and the cache, where one is given. Throws InputError where a file stops it. */
export async function analyse(cooldown: Cooldown, options: AnalyseOptions): Promise<Analysis> {
  const scratch = makeScratch();
  let troubled = false;
  const onTrouble = (trouble: string): void => {
    if (!troubled) options.onCacheTrouble?.(trouble);
    troubled = true;
  };
  const runner = makeRunner(options.workers, { signal: options.signal, onTrouble });
  let done = false;
  try {
    const run = { scratch, cache: cacheFor(cooldown, options, onTrouble) };
    const analysis = await analyseWith(runner, run, cooldown, options);
    const trouble = takeTrouble(run);
    if (trouble !== null) onTrouble(trouble);
    const release = holdScratch(scratch, isPictures);
    done = true;
    return { ...analysis, release };
  } finally {
    await runner.close();
    if (!done) removeScratch(scratch);
    if (options.cache !== undefined) trimCache(options.cache.folder, options.cache.limitBytes);
  }
}

/** Bytes a frame of results without full-size rasters: previews, profiles, maps. */
const SMALL_BYTES = 400_000;
/** Bytes a pixel of the two kinds of rasters kept: three channels as cleaned; signal, share and states. */
const RASTER_BYTES = 12 + 14;

function cacheFor(
  { frames }: Cooldown,
  { cache }: AnalyseOptions,
  onTrouble: (trouble: string) => void,
): CacheUse | null {
  if (cache === undefined) return null;
  forgetTroubles();
  const rasters = frames.reduce((sum, f) => sum + RASTER_BYTES * f.rows * f.cols, 0);
  const opened = openCache(cache.folder, cache.limitBytes, { rasters, small: SMALL_BYTES * frames.length });
  if (opened.trouble !== null) onTrouble(opened.trouble);
  return opened.use;
}

/** Some of the settings: a task is given those that it uses. */
function only<K extends keyof Settings>(settings: Settings, ...names: readonly K[]): Pick<Settings, K> {
  return Object.fromEntries(names.map((n) => [n, settings[n]])) as Pick<Settings, K>;
}

async function analyseWith(runner: Runner, run: Run, cooldown: Cooldown, options: AnalyseOptions): Promise<Analysis> {
  const { settings } = options;
  const { frames, tip, pixel } = cooldown;
  const notices: Notice[] = [...cooldown.notices];
  const step = progressOf(frames.length, options);
  const begin = (stage: string): void => {
    options.onStage?.(stage);
    // What a stage has added must not wait for the end of the run to make room.
    if (options.cache !== undefined) trimCache(options.cache.folder, options.cache.limitBytes);
  };

  // 1. Clean every frame; full-size rasters stay in the scratch folder.
  begin("cleaning");
  const cleaned = await runner.map(
    "clean",
    frames.map((info) => ({ ...run, pixel, info, settings: only(settings, "clean", "drift") })),
    step("cleaning"),
  );
  for (const c of cleaned) notices.push(...c.notices);
  const sources = cleaned.map(({ key }, k): FrameSource => ({
    pixel,
    info: frames[k],
    settings: only(settings, "clean"),
    key,
  }));

  // 2. Place every frame: pairs near in order first, then every useful pair that the first solution shows to overlap.
  begin("placing");
  const { drifts, driftPairs } = await placeFrames(runner, run, sources, settings, notices, step("placing"));

  dropDriftImages(run, frames.length);

  // 3. Debris: what stays on the sample while the domains come and go.
  begin("debris");
  const size = { rows: Math.max(...frames.map((f) => f.rows)), cols: Math.max(...frames.map((f) => f.cols)) };
  const ofDebris = { drifts, size, tip, settings: only(settings, "debris") };
  const debris = keyOf(run.cache, "debris", { frames: sources.map((f) => f.key), ...ofDebris });
  if (!scratchFromCache(run.cache, "debris", debris, run.scratch, DEBRIS_MAP)) {
    const parts = debrisParts(frames.length);
    await runner.map(
      "debris",
      parts.map((members, part) => ({ ...run, ...ofDebris, part, frames: members.map((k) => sources[k]) })),
    );
    await runner.map("debrisMap", [{ ...run, ...ofDebris, part: parts.length - 1 }]);
    keepScratchInCache(run.cache, "debris", debris, run.scratch, DEBRIS_MAP);
  }

  // 4. Levels of the two states, frame by frame, then carried along the temperature.
  begin("levels");
  const perFrame = sources.map((source, frame) => ({ ...run, frame, source, drift: drifts[frame], tip, debris }));
  const fits = await runner.map(
    "levels",
    perFrame.map((p) => ({ ...p, settings: only(settings, "debris", "states") })),
    step("levels"),
  );
  const track = trackLevels(fits, frames, settings.states);
  notices.push(...track.notices);

  // 5. States, walls, fringes and domains of every frame.
  begin("measuring");
  const measured = await runner.map(
    "measure",
    perFrame.map((p, k) => ({
      ...p,
      fit: fits[k] as (typeof fits)[number],
      levels: track.levels[k] as FrameLevels,
      seed: childSeed(settings.run.seed, p.frame),
      settings: only(settings, "debris", "states", "walls", "fringes", "domains"),
    })),
    step("measuring"),
  );

  // 6. What needs the whole cooldown: fringes that survive the number of tests, domain histories, loops.
  begin("histories");
  const fringes = controlFalseDiscovery(
    measured.flatMap((m) => m.fringes),
    settings.fringes,
  );
  const apparentNm = apparentWidthNm(measured);
  const ofHistories = { maps: measured.map((m) => m.map), pixel, drifts, settings: settings.domains, tip, apparentNm };
  const domains = await cached(run.cache, "histories", ofHistories, () =>
    trackDomains(
      {
        count: frames.length,
        at: (k) => labelledFrame(run, k, measured[k], pixel, (map) => labelDomains(map, k, tip, settings.domains)),
      },
      drifts,
      settings.domains,
      tip,
      apparentNm,
    ),
  );
  dropLabels(run, frames.length);
  const course = frames.map((f, k) => ({
    cycle: f.cycle,
    branch: f.branch,
    temperatureK: f.temperatureK,
    fraction: (measured[k] as MeasureOutput).fraction,
  }));
  const loops = findLoops(course, settings.loops, settings.run.seed);
  notices.push(...checkCourse(course, settings.loops));
  notices.push(
    ...missingForWidths(
      tip,
      frames.some((f) => f.sources.phase !== undefined),
    ),
    ...checkTip(
      measured.flatMap((m) => m.walls.profiles),
      tip,
    ),
  );

  // Of a frame that the user leaves out nothing else is said.
  const leftOut = (frame: number): boolean => frames[frame].excluded !== undefined;
  const results = measured.map((m, k): FrameResult => {
    const levels = track.levels[k] as FrameLevels;
    const own = fringes.filter((t) => t.frame === k);
    const { report, imagesSha256 } = cleaned[k] as (typeof cleaned)[number];
    const shown = (state: "insulating" | "metallic"): number | null =>
      (m.verdict === "mixed" || m.verdict === state) && Number.isFinite(levels[state].re)
        ? Math.hypot(levels[state].re, levels[state].im) / levels.gain
        : null;
    return withPictures(run.scratch, {
      frame: k,
      imagesSha256,
      verdict: m.verdict,
      drift: drifts[k] as Drift,
      fraction: m.fraction,
      amplitudeInsulating: shown("insulating"),
      amplitudeMetallic: shown("metallic"),
      gain: levels.gain,
      map: m.map,
      regions: m.regions,
      wallLengthNm: m.walls.wallLengthNm,
      walls: m.walls.walls,
      profiles: m.walls.profiles,
      widths: m.widths,
      fringes: own,
      fringeShare: fringeShare(own),
      usablePixels: m.usablePixels,
      debrisPixels: m.debrisPixels,
      scarPixels: report.scarPixels,
      noise: report.noise,
    });
  });
  return {
    cooldown,
    programVersion: options.programVersion,
    settings: settingRecord(settings),
    frames: results,
    domains,
    loops,
    notices: notices.filter((n) => n.frame === null || n.code === "excluded-frame" || !leftOut(n.frame)),
    driftPairs,
  };
}

/** A frame with what waits on disk to be drawn. Not a closure of the run, whose inner results would live as long as its answer. */
function withPictures(scratch: string, result: FrameResult): FrameResult {
  const { frame } = result;
  return Object.defineProperties(result, {
    previews: { enumerable: true, get: () => picturesOf(scratch, frame).previews },
    profileBins: { enumerable: true, get: () => picturesOf(scratch, frame).profileBins },
  });
}

async function placeFrames(
  runner: Runner,
  run: Run,
  sources: readonly FrameSource[],
  settings: Settings,
  notices: Notice[],
  onDone: () => void,
): Promise<{ readonly drifts: readonly Drift[]; readonly driftPairs: readonly DriftPair[] }> {
  const frames = sources.map((f) => f.info);
  const s = settings.drift;
  const measure = async (
    pairs: readonly (readonly [number, number])[],
    at: readonly Drift[] | null,
  ): Promise<PairShift[]> => {
    // by moving frame: a task reads that frame once
    const moving = [...new Set(pairs.map(([, m]) => m))].sort((a, b) => a - b);
    const found = await runner.map(
      "pairs",
      moving.map((frame) => ({
        ...run,
        frame,
        source: sources[frame],
        settings: only(settings, "drift"),
        against: pairs.flatMap(([reference, m]) => {
          if (m !== frame) return [];
          const a = at?.[reference];
          const b = at?.[frame];
          const known = a?.xNm != null && a.yNm != null && b?.xNm != null && b.yNm != null;
          const predicted = known
            ? { xNm: (b.xNm as number) - (a.xNm as number), yNm: (b.yNm as number) - (a.yNm as number) }
            : null;
          return [{ source: sources[reference], predicted }];
        }),
      })),
      onDone,
    );
    return found.flat();
  };
  const first = await measure(choosePairs(frames, null, s), null);
  const rough = solveDrift(frames, first, s);
  const more = furtherPairs(frames, first, rough, sources[0].pixel, s);
  const second = await measure(more, rough.drifts);
  const solved = solveDrift(frames, [...first, ...second], s);
  notices.push(...solved.notices);
  const rejected = new Set(solved.rejected.map(([a, b]) => `${a} ${b}`));
  const driftPairs = [...first, ...second].flatMap((p): DriftPair[] => {
    if (p.status === "failed") return [];
    const { reference, moving, xNm, yNm } = p;
    const used = !rejected.has(`${reference} ${moving}`);
    return [{ reference, moving, xNm, yNm, sdXNm: Math.sqrt(p.xxNm2), sdYNm: Math.sqrt(p.yyNm2), used }];
  });
  return { drifts: solved.drifts, driftPairs };
}

/** Median width of the cooldown's walls as seen, nm; 0 where no profile is sound. */
function apparentWidthNm(measured: readonly MeasureOutput[]): number {
  const seen = measured.flatMap((m) =>
    m.walls.profiles.flatMap((p) => (p.flag === "" && p.apparentWidthNm !== null ? [p.apparentWidthNm] : [])),
  );
  return seen.length === 0 ? 0 : median(seen);
}

/** Progress over the whole run. Shares of the time are rough; they only steer the bar. */
function progressOf(frames: number, options: AnalyseOptions): (stage: string) => () => void {
  // Clean, place (each frame in two rounds), levels, measure (the longest).
  const weights: Record<string, number> = { cleaning: 1, placing: 0.5, levels: 1, measuring: 4 };
  const total = frames * (1 + 2 * 0.5 + 1 + 4);
  let done = 0;
  return (stage) => () => {
    done = Math.min(total, done + (weights[stage] ?? 0));
    options.onProgress?.(stage, done, total);
  };
}
