import type { PixelSize } from "../../model/raster.js";
import type { Contrast } from "./chord.js";

/** Debris on the sample, in the cooldown's coordinates: the grid's pixel (row, column) lies at x = originXNm + column·pixel.xNm. */
export interface DebrisMap {
  readonly originXNm: number;
  readonly originYNm: number;
  readonly pixel: PixelSize;
  readonly rows: number;
  readonly cols: number;
  /** 1 = debris or its margin. */
  readonly mask: Uint8Array;
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
}
