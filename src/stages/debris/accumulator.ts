import type { Tip } from "../../model/cooldown.js";
import { colsOf, dataOf, type PixelSize, rowsOf } from "../../model/raster.js";
import type { CleanFrame, Drift } from "../../model/signal.js";
import { logsOf } from "../../numerics/log.js";
import { addHeights, addSignal } from "./add_frame.js";
import { contrastOf } from "./chord.js";
import { decide } from "./decide.js";
import { addEffect, emptyEffect, ratiosOf } from "./effect.js";
import { addGrid, type ChannelSums, type DebrisMap, type Grid } from "./grid.js";
import { reaches } from "./reaches.js";
import { heights, judge } from "./residuals.js";
import { ringOf } from "./ring.js";
import type { DebrisSettings } from "./settings.js";

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
    const exactRow = (drift.yNm - grid.originYNm) / grid.pixel.yNm;
    const exactCol = (drift.xNm - grid.originXNm) / grid.pixel.xNm;
    const at = { rows, cols, atRow: Math.round(exactRow), atCol: Math.round(exactCol) };

    const amplitude = dataOf(clean.amplitude);
    const values = logsOf(amplitude);
    const logRing = ringOf(values, rows, cols, ringXPx, ringYPx);
    const log = { values, judged: judge(values, logRing, null, rows, cols) };
    const phase = clean.phase === null ? null : dataOf(clean.phase);
    const phaseRing = phase === null ? null : ringOf(phase, rows, cols, ringXPx, ringYPx);
    const turned =
      phase === null || phaseRing === null
        ? null
        : { values: phase, judged: judge(phase, phaseRing, log.judged.flat, rows, cols) };
    addSignal(grid, log, turned, at);

    const [first, second] = log.judged.levels;
    grid.frames++;
    if (second !== undefined) grid.twoStateFrames++;
    grid.pair.noise = Math.max(grid.pair.noise, log.judged.noise, turned?.judged.noise ?? 0);
    if (second !== undefined) {
      const contrast =
        turned === null
          ? { logRatio: second - first, turnRad: 0 }
          : contrastOf([first, second], logRing, turned.judged.ring, turned.judged.flat);
      if (contrast !== null) grid.pair.contrasts.push(contrast);
    }
    const calm = log.judged.calm.map((c, b) => c & (turned?.judged.calm[b] ?? 1));
    const ratios = ratiosOf(amplitude, logRing, phase, phaseRing, calm, rows, cols);
    const effect = second === undefined ? grid.effect.lone : grid.effect.mixed;
    addEffect(effect, ratios, rows, cols, grid.rows, grid.cols, exactRow, exactCol);
    if (clean.topography !== null && grid.height !== null) {
      addHeights(grid, grid.height, heights(dataOf(clean.topography), rows, cols, ringXPx, ringYPx), at);
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
