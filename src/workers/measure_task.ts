import { deflateSync, inflateSync } from "node:zlib";
import type { PackedMap } from "../model/analysis.js";
import type { DomainRegion, FrameDomains } from "../model/domains.js";
import type { Preview, ProfileBins } from "../model/pictures.js";
import type { PixelSize } from "../model/raster.js";
import { colsOf, dataOf, makeRaster, rowsOf } from "../model/raster.js";
import type { CleanFrame, DomainMap, FrameLevels, FrameStates, FrameVerdict, Signal } from "../model/signal.js";
import type { FringeTest, FrameWalls, WallProfile, WidthSummary } from "../model/walls.js";
import type { Settings } from "../settings.js";
import { CORE } from "../stages/debris/index.js";
import { labelDomains } from "../stages/domains/index.js";
import { testFringes } from "../stages/fringes/index.js";
import { fitLevels, mapStates, type LevelFit } from "../stages/states/index.js";
import { fitWalls, summariseWidths } from "../stages/walls/index.js";
import { cached, keepInCache, kept, keyOf } from "./cached.js";
import { cleanOf, dropClean, type Run } from "./clean_task.js";
import { debrisOf, knowsDebris, type FrameInput } from "./debris_tasks.js";
import { makePreviews } from "./previews.js";
import { drop, fetchKept, isKept, keep } from "./scratch.js";

export interface LevelsInput extends FrameInput {
  readonly settings: Pick<Settings, "debris" | "states">;
}

const placed = ({ source, debris, drift, tip }: FrameInput): object => ({ frame: source.key, debris, drift, tip });

export async function levels(input: LevelsInput): Promise<LevelFit> {
  const { settings } = input;
  return cached(input.cache, "levels", { ...placed(input), settings }, async () => {
    const frame = await cleanOf(input, input.source);
    return fitLevels(frame, debrisOf(input, frame), input.tip, settings.states);
  });
}

export interface MeasureInput extends FrameInput {
  readonly fit: LevelFit;
  readonly levels: FrameLevels;
  readonly seed: number;
  readonly settings: Pick<Settings, "debris" | "states" | "walls" | "fringes" | "domains">;
}

interface MapOutput {
  /** Final: the levels propose, the map decides. */
  readonly verdict: FrameVerdict;
  readonly fraction: FrameStates["fraction"];
  readonly map: PackedMap;
  readonly usablePixels: number;
  readonly debrisPixels: number;
}

export interface MeasureOutput extends MapOutput {
  readonly regions: readonly DomainRegion[];
  /** Without bins; amplitudes gain-corrected. */
  readonly walls: FrameWalls;
  readonly widths: WidthSummary;
  readonly fringes: readonly FringeTest[];
}

/** What is only for drawing, and most of the bytes: it waits on disk until it is stored. */
export interface FramePictures {
  readonly previews: readonly Preview[];
  readonly profileBins: readonly ProfileBins[];
}

const picturesName = (frame: number): string => `pictures-${frame}`;
export const isPictures = (name: string): boolean => /^pictures-\d+$/.test(name);

export function picturesOf(scratch: string, frame: number): FramePictures {
  return fetchKept<FramePictures>(scratch, picturesName(frame));
}

const labelsName = (frame: number): string => `labels-${frame}`;

/** The labelled domains of a frame that was measured. */
export function labelledFrame(
  run: Run,
  frame: number,
  measured: MeasureOutput,
  pixel: PixelSize,
  label: (map: DomainMap) => FrameDomains,
): FrameDomains {
  const map = unpackMap(measured.map, pixel);
  if (!isKept(run.scratch, labelsName(frame))) return label(map);
  return { frame, map, labels: fetchKept<Int32Array>(run.scratch, labelsName(frame)), regions: measured.regions };
}

/** They are not needed once the histories are told. */
export function dropLabels(run: Run, frames: number): void {
  for (let frame = 0; frame < frames; frame++) drop(run.scratch, labelsName(frame));
}

export function packMap(map: DomainMap): PackedMap {
  return { rows: map.rows, cols: map.cols, deflated: deflateSync(map.states) };
}

export function unpackMap(packed: PackedMap, pixel: DomainMap["pixel"]): DomainMap {
  const bytes = inflateSync(packed.deflated);
  return {
    rows: packed.rows,
    cols: packed.cols,
    pixel,
    states: new Uint8Array(bytes.buffer, bytes.byteOffset, bytes.length),
  };
}

interface States {
  readonly signal: Signal;
  readonly states: FrameStates;
}

/** The states with the share as a plain array, which can be kept. */
interface FlatStates {
  readonly signal: Signal;
  readonly states: Omit<FrameStates, "share">;
  readonly share: Float32Array;
}

function flatStates({ signal, states: { share, ...states } }: States): FlatStates {
  return { signal, states, share: dataOf(share) };
}

function fullStates({ signal, states, share }: FlatStates): States {
  return { signal, states: { ...states, share: makeRaster(share, signal.rows, signal.cols, signal.pixel) } };
}

function once<T>(make: () => Promise<T>): () => Promise<T> {
  let made: Promise<T> | null = null;
  return () => (made ??= make());
}

/** States, walls, fringes and domains of one frame, with the levels that the whole cooldown has settled. Each is kept by itself: what
 *  a changed setting leaves alone is not done again, nor is a raster read that nobody asks for. */
export async function measure(input: MeasureInput): Promise<MeasureOutput> {
  const { settings: s, tip, cache, seed, fit } = input;
  const ofStates = { ...placed(input), fit, levels: input.levels, settings: { debris: s.debris, states: s.states } };
  const statesKey = keyOf(cache, "states", ofStates);
  const frame = once(() => cleanOf(input, input.source));
  const mapped = once(async (): Promise<States> => {
    const before = kept<FlatStates>(cache, "signal", statesKey);
    if (before !== null) return fullStates(before);
    const clean = await frame();
    const made = mapStates(clean, debrisOf(input, clean), fit, input.levels, tip, s.states);
    if (cache?.rasters === true) keepInCache(cache, "signal", statesKey, flatStates(made));
    return made;
  });
  const map = await cached(cache, "map", statesKey, async (): Promise<MapOutput> => {
    const { states } = await mapped();
    const clean = await frame();
    return {
      verdict: states.levels.verdict,
      fraction: states.fraction,
      map: packMap(states.map),
      ...countPixels(clean, debrisOf(input, clean)),
    };
  });
  const ofWalls = { states: statesKey, tip, seed, settings: s.walls };
  const { walls, widths } = await cached(cache, "walls", ofWalls, async () => {
    const { signal, states } = await mapped();
    const found = fitWalls(signal, states, tip, s.walls);
    return { walls: found, widths: summariseWidths(found.profiles, tip, s.walls, seed) };
  });
  const ofFringes = { walls: ofWalls, settings: s.fringes };
  const fringes = await cached(cache, "fringes", ofFringes, async () => {
    // A particle beside a wall turns the optical phase like a fringe: no test in a frame where nothing tells where the particles are.
    if (!knowsDebris(input.drift, await frame())) return [];
    const { signal, states } = await mapped();
    return testFringes(signal, states, walls, tip, s.fringes, seed);
  });
  const ofDomains = { states: statesKey, tip, settings: s.domains };
  const regions = await cached(cache, "domains", ofDomains, () => {
    const found = labelDomains(unpackMap(map.map, input.source.pixel), input.frame, tip, s.domains);
    keep(input.scratch, labelsName(input.frame), found.labels);
    return found.regions;
  });
  const { insulating, gain } = input.levels;
  const ofPreviews = { frame: input.source.key, correction: fit.correction, insulating, gain };
  const previews = await cached(cache, "previews", ofPreviews, async () =>
    makePreviews(await frame(), fit, input.levels),
  );
  const { bins = [], ...plainWalls } = walls;
  keep(input.scratch, picturesName(input.frame), { previews, profileBins: bins } satisfies FramePictures);
  dropClean(input, input.frame);
  return { ...map, regions, walls: { ...plainWalls, profiles: gainCorrected(walls.profiles, gain) }, widths, fringes };
}

/** Profiles with their amplitudes as scaled in the first frame. */
function gainCorrected(profiles: readonly WallProfile[], gain: number): WallProfile[] {
  const corrected = (v: number | null): number | null => (v === null ? null : v / gain);
  return profiles.map((p) => ({
    ...p,
    amplitudeInsulating: corrected(p.amplitudeInsulating),
    amplitudeMetallic: corrected(p.amplitudeMetallic),
  }));
}

function countPixels(clean: CleanFrame, debris: Uint8Array): { usablePixels: number; debrisPixels: number } {
  let usablePixels = 0;
  const amplitude = dataOf(clean.amplitude);
  for (let p = 0; p < rowsOf(clean.amplitude) * colsOf(clean.amplitude); p++)
    if (debris[p] !== CORE && Number.isFinite(amplitude[p])) usablePixels++;
  let debrisPixels = 0;
  for (const d of debris) if (d === CORE) debrisPixels++;
  return { usablePixels, debrisPixels };
}
