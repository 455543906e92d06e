import { deflateSync, inflateSync } from "node:zlib";
import type { PackedMap } from "../model/analysis.js";
import type { Cooldown, FrameInfo, Notice, Tip } from "../model/cooldown.js";
import type { DomainRegion, FrameDomains } from "../model/domains.js";
import type { ErrorRecord } from "../model/errors.js";
import type { Preview } from "../model/pictures.js";
import type { DomainMap, Drift, FrameLevels, FrameStates, FrameVerdict } from "../model/signal.js";
import type { FringeTest, FrameWalls, WidthSummary } from "../model/walls.js";
import { imagesDigest, inspectFrame, loadFrame } from "../input/index.js";
import type { Settings } from "../settings.js";
import { cleanFrame, type CleanReport } from "../stages/clean/index.js";
import { CORE, DebrisAccumulator, debrisInFrame, findDebrisInFrame, type DebrisMap } from "../stages/debris/index.js";
import { labelDomains } from "../stages/domains/index.js";
import { measurePair, prepareForDrift, type DriftImage, type PairShift } from "../stages/drift/index.js";
import { testFringes } from "../stages/fringes/index.js";
import { fitLevels, mapStates, type LevelFit } from "../stages/states/index.js";
import { fitWalls, summariseWidths } from "../stages/walls/index.js";
import { makePreviews } from "./previews.js";
import { drop, fetchClean, fetchKept, keep, keepClean } from "./scratch.js";

export type Reply<T> = { readonly ok: true; readonly value: T } | { readonly ok: false; readonly error: ErrorRecord };

/** What every task needs to know of the run. */
interface Run {
  readonly scratch: string;
  readonly settings: Settings;
}

interface CleanInput extends Run {
  readonly cooldown: Pick<Cooldown, "pixel">;
  readonly info: FrameInfo;
}
export interface CleanOutput {
  readonly imagesSha256: string;
  readonly report: CleanReport;
  readonly notices: readonly Notice[];
}

/** Load one frame, clean it, keep the clean rasters and the registration image in the scratch folder. */
async function clean(input: CleanInput): Promise<CleanOutput> {
  const raw = await loadFrame(input.cooldown, input.info);
  const notices = inspectFrame(raw, input.info);
  const { clean: frame, report } = cleanFrame(raw, input.settings.clean);
  keepClean(input.scratch, frame);
  keep(input.scratch, `drift-${frame.frame}`, prepareForDrift(frame, input.settings.drift));
  return {
    imagesSha256: await imagesDigest(input.cooldown, input.info, raw),
    report,
    notices: [...notices, ...report.notices],
  };
}

interface PairsInput extends Run {
  /** The moving frame of all these pairs. */
  readonly frame: number;
  readonly against: readonly {
    readonly reference: number;
    readonly predicted: { readonly xNm: number; readonly yNm: number } | null;
  }[];
}

/** The registration images used last stay in memory with what was computed from them: neighbouring frames share their partners. */
const images = new Map<string, DriftImage>();
const IMAGES_KEPT = 10;

function image(scratch: string, frame: number): DriftImage {
  const key = `${scratch}/${frame}`;
  const found = images.get(key) ?? fetchKept<DriftImage>(scratch, `drift-${frame}`);
  // the one used last stands last
  images.delete(key);
  if (images.size >= IMAGES_KEPT) images.delete(images.keys().next().value as string);
  images.set(key, found);
  return found;
}

/** Shifts of one frame against several. */
function pairs(input: PairsInput): PairShift[] {
  const moving = image(input.scratch, input.frame);
  return input.against.map(({ reference, predicted }) =>
    measurePair(image(input.scratch, reference), moving, predicted, input.settings.drift),
  );
}

interface DebrisInput extends Run {
  readonly drifts: readonly Drift[];
  /** Of the largest frame. */
  readonly size: { readonly rows: number; readonly cols: number };
  readonly tip: Tip | null;
  readonly part: number;
}

/** Frames whose debris is collected together, in order. Fixed by the number of frames alone: sums are rounded, and the answer must not hang on the
 *  number of workers. */
export function debrisParts(frames: number): number[][] {
  const each = Math.max(8, Math.ceil(frames / 4));
  return Array.from({ length: Math.ceil(frames / each) }, (_, k) =>
    Array.from({ length: Math.min(each, frames - k * each) }, (_, i) => k * each + i),
  );
}

/** What stays on the sample while domains come and go, as some of the frames show it. */
function debris(input: DebrisInput & { readonly frames: readonly number[] }): void {
  const accumulator = new DebrisAccumulator(input.drifts, input.tip, input.settings.debris, input.size);
  for (const frame of input.frames) {
    const drift = input.drifts[frame];
    if (drift !== undefined && drift.xNm !== null) accumulator.accumulate(fetchClean(input.scratch, frame), drift);
  }
  keep(input.scratch, `debris-${input.part}`, accumulator.part);
}

/** The map from all parts, 0 … `part`. */
function debrisMap(input: DebrisInput): { readonly share: number } {
  const accumulator = new DebrisAccumulator(input.drifts, input.tip, input.settings.debris, input.size);
  for (let k = 0; k <= input.part; k++) {
    accumulator.addPart(fetchKept<DebrisAccumulator["part"]>(input.scratch, `debris-${k}`));
    drop(input.scratch, `debris-${k}`);
  }
  const map = accumulator.finish();
  keep(input.scratch, "debris", map);
  let marked = 0;
  for (const v of map.mask) if (v === CORE) marked++;
  return { share: map.mask.length === 0 ? 0 : marked / map.mask.length };
}

interface FrameInput extends Run {
  readonly frame: number;
  readonly drift: Drift;
  readonly tip: Tip | null;
}

function debrisOf(input: FrameInput, clean: ReturnType<typeof fetchClean>): Uint8Array {
  if (input.drift.xNm === null) return findDebrisInFrame(clean, input.tip, input.settings.debris);
  const map = fetchKept<DebrisMap>(input.scratch, "debris");
  const [rows, cols] = clean.amplitude.values.shape as [number, number];
  return debrisInFrame(map, input.drift, rows, cols);
}

/** Whether debris can be told apart in this frame: by its own topography, or by its place on the sample, well known. */
function knowsDebris(input: FrameInput, clean: ReturnType<typeof fetchClean>): boolean {
  const { sdNm } = input.drift;
  return clean.topography !== null || (sdNm !== null && sdNm <= Math.max(clean.pixel.xNm, clean.pixel.yNm));
}

function levels(input: FrameInput): LevelFit {
  const frame = fetchClean(input.scratch, input.frame);
  return fitLevels(frame, debrisOf(input, frame), input.tip, input.settings.states);
}

interface MeasureInput extends FrameInput {
  readonly fit: LevelFit;
  readonly levels: FrameLevels;
  readonly seed: number;
}
export interface MeasureOutput {
  /** Final: the levels propose, the map decides. */
  readonly verdict: FrameVerdict;
  readonly fraction: FrameStates["fraction"];
  readonly map: PackedMap;
  readonly regions: readonly DomainRegion[];
  readonly walls: FrameWalls;
  readonly widths: WidthSummary;
  readonly fringes: readonly FringeTest[];
  readonly usablePixels: number;
  readonly debrisPixels: number;
  readonly previews: readonly Preview[];
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

/** States, walls, fringes and domains of one frame, with the levels that the whole cooldown has settled. */
async function measure(input: MeasureInput): Promise<MeasureOutput> {
  const { settings: s, tip } = input;
  const frame = fetchClean(input.scratch, input.frame);
  const mask = debrisOf(input, frame);
  const { signal, states } = mapStates(frame, mask, input.fit, input.levels, tip, s.states);
  const walls = fitWalls(signal, states, tip, s.walls);
  // A particle beside a wall turns the optical phase like a fringe: no test in a frame where nothing tells where the particles are.
  const fringes = knowsDebris(input, frame) ? testFringes(signal, states, walls, tip, s.fringes, input.seed) : [];
  const domains: FrameDomains = labelDomains(states.map, input.frame, tip, s.domains);
  let usablePixels = 0;
  const amplitude = frame.amplitude.values.data;
  for (let p = 0; p < mask.length; p++) if (mask[p] !== CORE && Number.isFinite(amplitude[p])) usablePixels++;
  let debrisPixels = 0;
  for (const d of mask) if (d === CORE) debrisPixels++;
  return {
    verdict: states.levels.verdict,
    fraction: states.fraction,
    map: packMap(states.map),
    regions: domains.regions,
    walls,
    widths: summariseWidths(walls.profiles, tip, s.walls, input.seed),
    fringes,
    usablePixels,
    debrisPixels,
    previews: await makePreviews(frame, input.fit, input.levels),
  };
}

const all = { clean, pairs, debris, debrisMap, levels, measure };
export type TaskName = keyof typeof all;
export type TaskInput<N extends TaskName> = Parameters<(typeof all)[N]>[0];
export type TaskOutput<N extends TaskName> = Awaited<ReturnType<(typeof all)[N]>>;
/** The tasks by name, typed so that a name keeps its input and its output together. */
export const tasks: { readonly [N in TaskName]: (input: TaskInput<N>) => TaskOutput<N> | Promise<TaskOutput<N>> } = all;
