import type { Tip } from "../../model/cooldown.js";
import { colsOf, dataOf, type PixelSize, rowsOf } from "../../model/raster.js";
import type { CleanFrame, Drift } from "../../model/signal.js";
import { wrapAngle } from "../../numerics/quantile.js";
import { contrastOf } from "./chord.js";
import { decide } from "./decide.js";
import { addEffect, emptyEffect, ratiosOf } from "./effect.js";
import { addGrid, type ChannelSums, type DebrisMap, type Grid, type HeightSums } from "./grid.js";
import { departures, heights } from "./residuals.js";
import { type Ring, ringOf } from "./ring.js";
import { reaches } from "./reaches.js";
import type { DebrisSettings } from "./settings.js";

/** Departures beyond this many standard deviations count no more: one frame's domain must not outweigh the others. */
const CLIP = 3;
/** Departure of the logarithm of the amplitude beyond which noise rules. */
const MOST_LOG = 2;
/** A departure that counts as seen. */
const SEEN = 1;

export interface FrameSize {
  readonly rows: number;
  readonly cols: number;
}

/** Collects what all placed frames of a cooldown say about debris, on one grid over the sample. The memory is that of the grid,
 *  whatever the number of frames.
 *
 *  In every frame each pixel is compared with its surroundings (a ring of eight boxes): height, logarithm of the amplitude, phase. The
 *  last two count only where the surroundings are of one state. Debris departs in nearly all frames; walls and small domains in few. */
export class DebrisAccumulator {
  readonly #drifts: readonly Drift[];
  readonly #size: FrameSize | null;
  readonly #tip: Tip | null;
  readonly #settings: DebrisSettings;
  #grid: Grid | null = null;

  /** @param drifts of all frames: they say how large a grid is needed
   *  @param size of the largest frame; null: as large as the first that is added */
  constructor(drifts: readonly Drift[], tip: Tip | null, settings: DebrisSettings, size: FrameSize | null = null) {
    this.#drifts = drifts;
    this.#size = size;
    this.#tip = tip;
    this.#settings = settings;
  }

  /** Adds one frame. A frame that was not placed, or not to a pixel, is left out. */
  accumulate(clean: CleanFrame, drift: Drift): void {
    const { pixel } = clean;
    if (drift.xNm === null || drift.yNm === null) return;
    if ((drift.sdNm ?? 0) > Math.min(pixel.xNm, pixel.yNm)) return;
    const rows = rowsOf(clean.amplitude);
    const cols = colsOf(clean.amplitude);
    this.#grid ??= this.#makeGrid(pixel, this.#size ?? { rows, cols });
    const grid = this.#grid;
    const { ringXPx, ringYPx } = reaches(pixel, this.#tip, this.#settings);
    const atCol = Math.round((drift.xNm - grid.originXNm) / grid.pixel.xNm);
    const atRow = Math.round((drift.yNm - grid.originYNm) / grid.pixel.yNm);

    const amplitude = dataOf(clean.amplitude);
    const log = new Float32Array(amplitude.length);
    for (let p = 0; p < log.length; p++) log[p] = amplitude[p] > 0 ? Math.log(amplitude[p]) : Number.NaN;
    const ringOfLog = ringOf(log, rows, cols, ringXPx, ringYPx);
    const byAmplitude = departures(log, ringOfLog, null, rows, cols);
    addChannel(grid.amplitude, byAmplitude.strict, grid, rows, cols, atRow, atCol);
    addChannel(grid.looseAmplitude, byAmplitude.loose, grid, rows, cols, atRow, atCol);
    grid.frames++;
    if (byAmplitude.levels.length === 2) grid.twoStateFrames++;
    const sums = byAmplitude.levels.length === 2 ? grid.effect.mixed : grid.effect.lone;
    const exactRow = (drift.yNm - grid.originYNm) / grid.pixel.yNm;
    const exactCol = (drift.xNm - grid.originXNm) / grid.pixel.xNm;
    const addRatios = (phase: Float32Array | null, ring: Ring | null, calm: Uint8Array): void => {
      const reference = ring?.reference ?? null;
      const ratio = ratiosOf(log, ringOfLog.reference, phase, reference, calm, rows, cols, ringOfLog.blockCols);
      addEffect(sums, ratio.re, ratio.im, rows, cols, grid.rows, grid.cols, exactRow, exactCol);
    };
    grid.pair.noise = Math.max(grid.pair.noise, byAmplitude.noise);
    const [first, second] = byAmplitude.levels;
    if (clean.phase === null) {
      addRatios(null, null, byAmplitude.calm);
      if (second !== undefined) grid.pair.contrasts.push({ logRatio: second - first, turnRad: 0 });
    } else if (grid.phase !== null) {
      const phase = dataOf(clean.phase);
      const ring = ringOf(phase, rows, cols, ringXPx, ringYPx);
      const byPhase = departures(phase, ring, byAmplitude.flat, rows, cols);
      addChannel(grid.phase, byPhase.strict, grid, rows, cols, atRow, atCol);
      addPairs(grid, log, ringOfLog, phase, ring, byPhase.flat, rows, cols, atRow, atCol);
      addRatios(
        phase,
        ring,
        byPhase.calm.map((c, b) => c & byAmplitude.calm[b]),
      );
      grid.pair.noise = Math.max(grid.pair.noise, byPhase.noise);
      const contrast = second === undefined ? null : contrastOf([first, second], ringOfLog, ring, byPhase.flat);
      if (contrast !== null) grid.pair.contrasts.push(contrast);
    }
    if (clean.topography !== null && grid.height !== null) {
      addHeights(
        grid.height,
        heights(dataOf(clean.topography), rows, cols, ringXPx, ringYPx),
        grid,
        rows,
        cols,
        atRow,
        atCol,
      );
    }
  }

  /** What was collected, plain data; null where no frame was added. */
  get part(): Grid | null {
    return this.#grid;
  }

  /** Adds what another accumulator of the same drifts, frame size and settings has collected. Sums are rounded: the same parts in the same order give
   *  the same bits. */
  addPart(part: Grid | null): void {
    if (part === null) return;
    if (this.#grid === null) this.#grid = part;
    else addGrid(this.#grid, part);
  }

  /** The map of debris. Empty (0 × 0) where no frame was added. */
  finish(): DebrisMap {
    if (this.#grid === null) {
      const pixel = { xNm: 1, yNm: 1 };
      return {
        originXNm: 0,
        originYNm: 0,
        pixel,
        rows: 0,
        cols: 0,
        mask: new Uint8Array(0),
        strength: new Float32Array(0),
        spots: 0,
      };
    }
    return decide(this.#grid, this.#tip, this.#settings);
  }

  #makeGrid(pixel: PixelSize, size: FrameSize): Grid {
    const placed = this.#drifts.filter((d) => d.xNm !== null && d.yNm !== null);
    const xs = placed.map((d) => d.xNm ?? 0);
    const ys = placed.map((d) => d.yNm ?? 0);
    const originXNm = Math.min(0, ...xs);
    const originYNm = Math.min(0, ...ys);
    const cols = size.cols + Math.ceil((Math.max(0, ...xs) - originXNm) / pixel.xNm) + 1;
    const rows = size.rows + Math.ceil((Math.max(0, ...ys) - originYNm) / pixel.yNm) + 1;
    const n = rows * cols;
    const channel = (): ChannelSums => ({
      sum: new Float32Array(n),
      count: new Uint16Array(n),
      above: new Uint16Array(n),
      below: new Uint16Array(n),
    });
    return {
      rows,
      cols,
      originXNm,
      originYNm,
      pixel,
      height: { sum: new Float32Array(n), squares: new Float32Array(n), count: new Uint16Array(n) },
      frames: 0,
      twoStateFrames: 0,
      amplitude: channel(),
      looseAmplitude: channel(),
      pair: { log: new Float32Array(n), turn: new Float32Array(n), count: new Uint16Array(n), noise: 0, contrasts: [] },
      phase: channel(),
      effect: { lone: emptyEffect(n), mixed: emptyEffect(n) },
    };
  }
}

/** Calls `add` for every row of a frame that lies on the grid, with the first pixel's index on the grid and in the frame and their number. Frames
 *  of one cooldown may differ in size. */
function overGrid(
  grid: Grid,
  rows: number,
  cols: number,
  atRow: number,
  atCol: number,
  add: (onGrid: number, inFrame: number, count: number) => void,
): void {
  const from = Math.max(0, -atCol);
  const to = Math.min(cols, grid.cols - atCol);
  for (let i = Math.max(0, -atRow); i < Math.min(rows, grid.rows - atRow); i++)
    add((i + atRow) * grid.cols + from + atCol, i * cols + from, to - from);
}

function addChannel(
  sums: ChannelSums,
  departure: Float32Array,
  grid: Grid,
  rows: number,
  cols: number,
  atRow: number,
  atCol: number,
): void {
  const { sum, count, above, below } = sums;
  overGrid(grid, rows, cols, atRow, atCol, (onGrid, inFrame, n) => {
    for (let g = onGrid, p = inFrame; p < inFrame + n; g++, p++) {
      const z = departure[p];
      if (Number.isNaN(z)) continue;
      sum[g] += z > CLIP ? CLIP : z < -CLIP ? -CLIP : z;
      count[g]++;
      if (z > SEEN) above[g]++;
      else if (z < -SEEN) below[g]++;
    }
  });
}

function addPairs(
  grid: Grid,
  log: Float32Array,
  ringOfLog: Ring,
  phase: Float32Array,
  ringOfPhase: Ring,
  flat: Uint8Array,
  rows: number,
  cols: number,
  atRow: number,
  atCol: number,
): void {
  const { pair } = grid;
  overGrid(grid, rows, cols, atRow, atCol, (onGrid, inFrame, n) => {
    const i = Math.floor(inFrame / cols);
    const block = (i >> 1) * ringOfLog.blockCols;
    for (let g = onGrid, p = inFrame, j = inFrame - i * cols; p < inFrame + n; g++, p++, j++) {
      const b = block + (j >> 1);
      if (flat[b] === 0) continue;
      const a = log[p] - ringOfLog.reference[b];
      const t = phase[p] - ringOfPhase.reference[b];
      if (Number.isNaN(a) || Number.isNaN(t)) continue;
      pair.log[g] += a > MOST_LOG ? MOST_LOG : a < -MOST_LOG ? -MOST_LOG : a;
      pair.turn[g] += t > -3 && t < 3 ? t : wrapAngle(t);
      pair.count[g]++;
    }
  });
}

function addHeights(
  sums: HeightSums,
  heightNm: Float32Array,
  grid: Grid,
  rows: number,
  cols: number,
  atRow: number,
  atCol: number,
): void {
  overGrid(grid, rows, cols, atRow, atCol, (onGrid, inFrame, n) => {
    for (let g = onGrid, p = inFrame; p < inFrame + n; g++, p++) {
      const h = heightNm[p];
      if (Number.isNaN(h)) continue;
      sums.sum[g] += h;
      sums.squares[g] += h * h;
      sums.count[g]++;
    }
  });
}
