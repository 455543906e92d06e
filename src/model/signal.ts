import type { PixelSize, Raster } from "./raster.js";

/** One frame after cleaning. All rasters have the frame's shape; NaN = not measured, or a scar. */
export interface CleanFrame {
  readonly frame: number;
  readonly pixel: PixelSize;
  /** Levelled, nm; null where the channel is missing. */
  readonly topography: Raster | null;
  /** Rows scaled to one gain, the file's unit, never below zero by correction. */
  readonly amplitude: Raster;
  /** Rows referenced to each other and turned so that the circular mean is 0, rad in (−π, π]; null where missing. */
  readonly phase: Raster | null;
  /** What is left of each row's own gain, relative, 1 sd; absent: nothing is known of it. */
  readonly rowGainErrorSd?: Float32Array | null;
}

/** The near-field signal of one frame as the later stages use it. Row-major [rows, cols]. Without an optical phase `im` is null and
 *  `re` is the amplitude. Unusable pixels (not measured, scar, debris) have usable 0; their re/im must not be read. */
export interface Signal {
  readonly frame: number;
  readonly rows: number;
  readonly cols: number;
  readonly pixel: PixelSize;
  readonly re: Float32Array;
  readonly im: Float32Array | null;
  readonly usable: Uint8Array;
}

/** 2 × 2 covariance of the pixel noise of (re, im); only `rr` is used where there is no phase. */
export interface NoiseCovariance {
  readonly rr: number;
  readonly ri: number;
  readonly ii: number;
}

export interface ComplexValue {
  readonly re: number;
  readonly im: number;
}

export type FrameVerdict = "mixed" | "metallic" | "insulating" | "undecided";

/** What the two states look like in one frame: levels in this frame's signal (its own gain and phase reference), noise at each. */
export interface FrameLevels {
  readonly frame: number;
  readonly verdict: FrameVerdict;
  /** Level of the insulating state in `Signal` units; in a single-state frame, the level predicted from the track where there is one. */
  readonly insulating: ComplexValue;
  readonly metallic: ComplexValue;
  readonly noiseInsulating: NoiseCovariance;
  readonly noiseMetallic: NoiseCovariance;
  /** Correlation of the noise of neighbouring pixels along x and along y, measured in single-state areas (0 = white). */
  readonly noiseCorrelationX: number;
  readonly noiseCorrelationY: number;
  /** Gain of this frame relative to the first one; |levels| divided by it are in the unit as scaled in the first frame. */
  readonly gain: number;
  /** Standard deviation of the threshold u = 0.5 in units of u, from the uncertainty of the two levels. */
  readonly thresholdSd: number;
}

export const INSULATING = 0;
export const METALLIC = 1;
/** Not measured, scar or debris. */
export const NO_STATE = 255;

/** A map of the two states: row-major [rows, cols] of INSULATING, METALLIC or NO_STATE. */
export interface DomainMap {
  readonly rows: number;
  readonly cols: number;
  readonly pixel: PixelSize;
  readonly states: Uint8Array;
}

/** The states of one frame. */
export interface FrameStates {
  readonly frame: number;
  readonly levels: FrameLevels;
  /** Share of the metallic signal, 0 at the insulating level and 1 at the metallic one, noise included; NaN where unusable. */
  readonly share: Raster;
  readonly map: DomainMap;
  /** Metallic fraction of the usable pixels with its 95 % interval for this field of view; null where undecided. */
  readonly fraction: { readonly value: number; readonly low: number; readonly high: number } | null;
  /** What is not known of the gain of each row, relative, 1 sd; absent: nothing. */
  readonly rowGainSd?: Float32Array | null;
}

/** Position of a frame in the cooldown's coordinates; a pixel lies at x = col·pixel.xNm + xNm. Null numbers: could not be placed. */
export interface Drift {
  readonly frame: number;
  readonly xNm: number | null;
  readonly yNm: number | null;
  readonly sdNm: number | null;
}
