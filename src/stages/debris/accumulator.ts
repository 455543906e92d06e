import type { Tip } from "../../model/cooldown.js";
import { colsOf, dataOf, rowsOf } from "../../model/raster.js";
import type { CleanFrame, Drift } from "../../model/signal.js";
import { wrapAngle } from "../../numerics/quantile.js";
import { contrastOf } from "./chord.js";
import { decide } from "./decide.js";
import { addEffect, emptyEffect, ratiosOf } from "./effect.js";
import type { ChannelSums, DebrisMap, Grid, HeightSums } from "./grid.js";
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

/** Collects what all placed frames of a cooldown say about debris, on one grid over the sample. The memory is that of the grid,
 *  whatever the number of frames.
 *
 *  In every frame each pixel is compared with its surroundings (a ring of eight boxes): height, logarithm of the amplitude, phase. The
 *  last two count only where the surroundings are of one state. Debris departs in nearly all frames; walls and small domains in few. */
export class DebrisAccumulator {
  readonly #drifts: readonly Drift[];
  readonly #tip: Tip | null;
  readonly #settings: DebrisSettings;
  #grid: Grid | null = null;

  /** @param drifts of all frames: they say how large a grid is needed */
  constructor(drifts: readonly Drift[], tip: Tip | null, settings: DebrisSettings) {
    this.#drifts = drifts;
    this.#tip = tip;
    this.#settings = settings;
  }

  /** Adds one frame. A frame that was not placed, or not to a pixel, is left out. */
  accumulate(clean: CleanFrame, drift: Drift): void {
    const { pixel } = clean;
    if (drift.xNm === null || drift.yNm === null) return;
    if ((drift.sdNm ?? 0) > Math.min(pixel.xNm, pixel.yNm)) return;
    this.#grid ??= this.#makeGrid(clean);
    const grid = this.#grid;
    const rows = rowsOf(clean.amplitude);
    const cols = colsOf(clean.amplitude);
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

  #makeGrid(first: CleanFrame): Grid {
    const { pixel } = first;
    const placed = this.#drifts.filter((d) => d.xNm !== null && d.yNm !== null);
    const xs = placed.map((d) => d.xNm ?? 0);
    const ys = placed.map((d) => d.yNm ?? 0);
    const originXNm = Math.min(0, ...xs);
    const originYNm = Math.min(0, ...ys);
    const cols = colsOf(first.amplitude) + Math.ceil((Math.max(0, ...xs) - originXNm) / pixel.xNm) + 1;
    const rows = rowsOf(first.amplitude) + Math.ceil((Math.max(0, ...ys) - originYNm) / pixel.yNm) + 1;
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

/** Calls `add` for every frame pixel that lies on the grid. Frames of one cooldown may differ in size. */
function overGrid(
  grid: Grid,
  rows: number,
  cols: number,
  atRow: number,
  atCol: number,
  add: (onGrid: number, inFrame: number) => void,
): void {
  for (let i = 0; i < rows; i++) {
    const r = i + atRow;
    if (r < 0 || r >= grid.rows) continue;
    const from = Math.max(0, -atCol);
    const to = Math.min(cols, grid.cols - atCol);
    for (let j = from; j < to; j++) add(r * grid.cols + j + atCol, i * cols + j);
  }
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
  overGrid(grid, rows, cols, atRow, atCol, (g, p) => {
    const z = departure[p];
    if (Number.isNaN(z)) return;
    sums.sum[g] += z > CLIP ? CLIP : z < -CLIP ? -CLIP : z;
    sums.count[g]++;
    if (z > SEEN) sums.above[g]++;
    else if (z < -SEEN) sums.below[g]++;
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
  overGrid(grid, rows, cols, atRow, atCol, (g, p) => {
    const i = Math.floor(p / cols);
    const b = (i >> 1) * ringOfLog.blockCols + ((p - i * cols) >> 1);
    if (flat[b] === 0) return;
    const a = log[p] - ringOfLog.reference[b];
    const t = phase[p] - ringOfPhase.reference[b];
    if (Number.isNaN(a) || Number.isNaN(t)) return;
    pair.log[g] += Math.max(-MOST_LOG, Math.min(MOST_LOG, a));
    pair.turn[g] += wrapAngle(t);
    pair.count[g]++;
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
  overGrid(grid, rows, cols, atRow, atCol, (g, p) => {
    const h = heightNm[p];
    if (Number.isNaN(h)) return;
    sums.sum[g] += h;
    sums.squares[g] += h * h;
    sums.count[g]++;
  });
}
