import type { PixelSize } from "../../model/raster.js";
import type { Contrast } from "./chord.js";

/** Pixels whose signal is so affected that their state cannot be trusted. */
export const CORE = 1;
/** Pixels about them whose signal is disturbed, or could be by the tip's blur: their state holds, but levels and walls are not to be
 *  fitted to them. */
export const MARGIN = 2;

/** Debris on the sample, in the cooldown's coordinates: the grid's pixel (row, column) lies at x = originXNm + column·pixel.xNm. */
export interface DebrisMap {
  readonly originXNm: number;
  readonly originYNm: number;
  readonly pixel: PixelSize;
  readonly rows: number;
  readonly cols: number;
  /** CORE, MARGIN or 0. */
  readonly mask: Uint8Array;
  /** What debris does to the signal, in multiples of what makes a core; between the pixels it goes straight. 0 away from debris. */
  readonly strength: Float32Array;
  /** Separate spots. */
  readonly spots: number;
}

/** What the frames said about one channel, summed on the grid. */
export interface ChannelSums {
  readonly sum: Float32Array;
  readonly count: Uint16Array;
  readonly above: Uint16Array;
  readonly below: Uint16Array;
}

/** Weighted sums of complex departures z/z_surroundings − 1 on the grid, of their weights, and of the weights' squares. */
export interface EffectSums {
  readonly re: Float32Array;
  readonly im: Float32Array;
  readonly weight: Float32Array;
  readonly squares: Float32Array;
}

export interface HeightSums {
  readonly sum: Float32Array;
  readonly squares: Float32Array;
  readonly count: Uint16Array;
}

/** Plain departures of logarithm of amplitude and phase, where both could be judged. */
export interface PairSums {
  readonly log: Float32Array;
  readonly turn: Float32Array;
  readonly count: Uint16Array;
  /** Largest pixel noise met, of either. */
  noise: number;
  /** The step between the states in each frame that showed both. */
  readonly contrasts: Contrast[];
}

export interface Grid {
  readonly rows: number;
  readonly cols: number;
  readonly originXNm: number;
  readonly originYNm: number;
  readonly pixel: PixelSize;
  readonly height: HeightSums | null;
  /** Frames that were added. */
  frames: number;
  /** Of them, frames seen to show both states. */
  twoStateFrames: number;
  readonly amplitude: ChannelSums;
  /** The same with pixels between the levels of a frame's two states: no proof of debris by itself. */
  readonly looseAmplitude: ChannelSums;
  readonly pair: PairSums;
  readonly phase: ChannelSums | null;
  /** From frames that show one state only, and from all others. */
  readonly effect: { readonly lone: EffectSums; readonly mixed: EffectSums };
}

/** Adds `part` to `grid`, of the same size. */
export function addGrid(grid: Grid, part: Grid): void {
  if (grid.rows !== part.rows || grid.cols !== part.cols)
    throw new RangeError(`a grid of ${part.rows} × ${part.cols} pixels added to one of ${grid.rows} × ${grid.cols}`);
  grid.frames += part.frames;
  grid.twoStateFrames += part.twoStateFrames;
  grid.pair.noise = Math.max(grid.pair.noise, part.pair.noise);
  grid.pair.contrasts.push(...part.pair.contrasts);
  addArrays(grid.height, part.height);
  addArrays(grid.amplitude, part.amplitude);
  addArrays(grid.looseAmplitude, part.looseAmplitude);
  addArrays(grid.pair, part.pair);
  addArrays(grid.phase, part.phase);
  addArrays(grid.effect.lone, part.effect.lone);
  addArrays(grid.effect.mixed, part.effect.mixed);
}

/** Adds every array of sums to the one of the same name. */
function addArrays<T extends object>(to: T | null, from: T | null): void {
  if (to === null || from === null) return;
  const added = new Map<string, unknown>(Object.entries(from));
  for (const [name, a] of Object.entries(to)) {
    const b = added.get(name);
    if (a instanceof Float32Array && b instanceof Float32Array) for (let p = 0; p < a.length; p++) a[p] += b[p];
    if (a instanceof Uint16Array && b instanceof Uint16Array) for (let p = 0; p < a.length; p++) a[p] += b[p];
  }
}
