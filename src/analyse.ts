import type { Analysis, FrameResult } from "./model/analysis.js";
import type { Cooldown, Notice } from "./model/cooldown.js";
import type { DriftPair } from "./model/pictures.js";
import type { Drift, FrameLevels } from "./model/signal.js";
import { median } from "./numerics/quantile.js";
import { childSeed } from "./numerics/random.js";
import { settingRecord, type Settings } from "./settings.js";
import { labelDomains, trackDomains } from "./stages/domains/index.js";
import { choosePairs, solveDrift, type PairShift } from "./stages/drift/index.js";
import { controlFalseDiscovery, fringeShare } from "./stages/fringes/index.js";
import { checkCourse, findLoops } from "./stages/loops/index.js";
import { trackLevels } from "./stages/states/index.js";
import { checkTip, missingForWidths } from "./stages/walls/index.js";
import { makeRunner, type Runner } from "./workers/pool.js";
import { makeScratch, removeScratch } from "./workers/scratch.js";
import { debrisParts, unpackMap, type MeasureOutput } from "./workers/tasks.js";

export interface AnalyseOptions {
  readonly settings: Settings;
  readonly programVersion: string;
  /** Worker threads; 0 = none. The results are the same to the bit for any number. */
  readonly workers: number;
  readonly signal?: AbortSignal;
  /** Called as the work goes on: what is being done, and how far the whole has come. */
  readonly onProgress?: (stage: string, done: number, total: number) => void;
  /** Called as each stage begins, for measuring. */
  readonly onStage?: (stage: string) => void;
}

/** The whole way of one cooldown, from described files to an analysis. Nothing is written but a scratch folder, removed at the end.
 *  Throws InputError where a file stops it. */
export async function analyse(cooldown: Cooldown, options: AnalyseOptions): Promise<Analysis> {
  const scratch = makeScratch();
  const runner = makeRunner(options.workers, options.signal);
  try {
    return await analyseWith(runner, scratch, cooldown, options);
  } finally {
    await runner.close();
    removeScratch(scratch);
  }
}

async function analyseWith(
  runner: Runner,
  scratch: string,
  cooldown: Cooldown,
  options: AnalyseOptions,
): Promise<Analysis> {
  const { settings } = options;
  const { frames, tip } = cooldown;
  const run = { scratch, settings };
  const notices: Notice[] = [...cooldown.notices];
  const step = progressOf(frames.length, options);
  const begin = (stage: string): void => options.onStage?.(stage);

  // 1. Clean every frame; full-size rasters stay in the scratch folder.
  begin("cleaning");
  const cleaned = await runner.map(
    "clean",
    frames.map((info) => ({ ...run, cooldown: { pixel: cooldown.pixel }, info })),
    step("cleaning"),
  );
  for (const c of cleaned) notices.push(...c.notices);

  // 2. Place every frame: pairs near in order first, then every useful pair that the first solution shows to overlap.
  begin("placing");
  const { drifts, driftPairs } = await placeFrames(runner, run, cooldown, notices, step("placing"));

  // 3. Debris: what stays on the sample while the domains come and go.
  begin("debris");
  const size = { rows: Math.max(...frames.map((f) => f.rows)), cols: Math.max(...frames.map((f) => f.cols)) };
  const parts = debrisParts(frames.length);
  const debris = { ...run, drifts, size, tip };
  await runner.map(
    "debris",
    parts.map((members, part) => ({ ...debris, part, frames: members })),
  );
  await runner.map("debrisMap", [{ ...debris, part: parts.length - 1 }]);

  // 4. Levels of the two states, frame by frame, then carried along the temperature.
  begin("levels");
  const perFrame = frames.map((f) => ({ ...run, frame: f.frame, drift: drifts[f.frame] as Drift, tip }));
  const fits = await runner.map("levels", perFrame, step("levels"));
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
    })),
    step("measuring"),
  );

  // 6. What needs the whole cooldown: fringes that survive the number of tests, domain histories, loops.
  begin("histories");
  const fringes = controlFalseDiscovery(
    measured.flatMap((m) => m.fringes),
    settings.fringes,
  );
  const domains = trackDomains(
    {
      count: frames.length,
      at: (k) => labelDomains(unpackMap((measured[k] as MeasureOutput).map, cooldown.pixel), k, tip, settings.domains),
    },
    drifts,
    settings.domains,
    tip,
    apparentWidthNm(measured),
  );
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
    return {
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
      profiles: m.walls.profiles.map((p) => ({
        ...p,
        amplitudeInsulating: p.amplitudeInsulating === null ? null : p.amplitudeInsulating / levels.gain,
        amplitudeMetallic: p.amplitudeMetallic === null ? null : p.amplitudeMetallic / levels.gain,
      })),
      widths: m.widths,
      fringes: own,
      fringeShare: fringeShare(own),
      usablePixels: m.usablePixels,
      debrisPixels: m.debrisPixels,
      scarPixels: report.scarPixels,
      noise: report.noise,
      previews: m.previews,
      profileBins: m.walls.bins ?? [],
    };
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

async function placeFrames(
  runner: Runner,
  run: { scratch: string; settings: Settings },
  cooldown: Cooldown,
  notices: Notice[],
  onDone: () => void,
): Promise<{ readonly drifts: readonly Drift[]; readonly driftPairs: readonly DriftPair[] }> {
  const { frames } = cooldown;
  const s = run.settings.drift;
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
        against: pairs.flatMap(([reference, m]) => {
          if (m !== frame) return [];
          const a = at?.[reference];
          const b = at?.[frame];
          const known = a?.xNm != null && a.yNm != null && b?.xNm != null && b.yNm != null;
          const predicted = known
            ? { xNm: (b.xNm as number) - (a.xNm as number), yNm: (b.yNm as number) - (a.yNm as number) }
            : null;
          return [{ reference, predicted }];
        }),
      })),
      onDone,
    );
    return found.flat();
  };
  const first = await measure(choosePairs(frames, null, s), null);
  const rough = solveDrift(frames, first, s);
  const known = new Set(first.map((p) => `${p.reference} ${p.moving}`));
  const more = choosePairs(frames, rough.drifts, s).filter(([a, b]) => !known.has(`${a} ${b}`));
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
