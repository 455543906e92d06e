import type { PixelSize } from "../../model/raster.js";
import type { FrameNoise } from "./noise.js";

/** One channel of one frame, as the fits use it. Rows × cols, row-major; NaN = not measured, left out. */
export interface TipImage {
  readonly rows: number;
  readonly cols: number;
  readonly pixel: PixelSize;
  /** One image, or two: real and imaginary part of the near-field signal, which share a shape but not their levels. */
  readonly components: readonly Float32Array[];
  /** Angles: compared the short way round. */
  readonly isAngle: boolean;
  /** Amplitude at each pixel where the noise goes as 1/amplitude (the optical phase), else null. */
  readonly amplitude: Float32Array | null;
  /** One a component. For an angle with `amplitude`: of amplitude × angle. */
  readonly noise: readonly FrameNoise[];
  /** Height, levelled, nm; null where the channel itself is the topography or there is none. */
  readonly heightNm: Float32Array | null;
  /** Optical phase beside an amplitude, rad, to tell whether the amplitude alone distorts the feature; else null. */
  readonly phaseRad: Float32Array | null;
}

/** A place in a frame, nm: x = column × pixel.xNm, y = row × pixel.yNm. No drift. */
export interface Place {
  readonly xNm: number;
  readonly yNm: number;
}

export interface CutLine {
  readonly from: Place;
  readonly to: Place;
  /** Pixels up to half of this from the line are used. */
  readonly widthNm: number;
}

export type TipModel = "edge" | "bar" | "dot";

export type WarningCode =
  | "coarse-sampling"
  | "relief"
  | "rim"
  | "asymmetric"
  | "tails"
  | "soft-edge"
  | "poor-fit"
  | "uneven-plateaus"
  | "short-line"
  | "directions-differ"
  | "one-direction"
  | "size-not-separable"
  | "phase-turns"
  | "correlated-noise";

export interface TipWarning {
  readonly code: WarningCode;
  readonly message: string;
}

/** A full width at half maximum with its standard deviation, nm. */
export interface Width {
  readonly nm: number;
  readonly sdNm: number;
}

export interface TipMeasured {
  /** `upper-limit`: the tip is no coarser than `fwhmNm`, but the particle's own size cannot be told from the tip's. */
  readonly status: "measured" | "upper-limit";
  readonly model: TipModel;
  /** Full width at half maximum of the tip's response; for a limit, the width the feature shows. */
  readonly fwhmNm: number;
  /** Edge: half of the 95 % interval over 1.96. Particle: with its size averaged over. For a limit: of the width the feature shows. */
  readonly sdNm: number;
  /** 95 % interval by profile likelihood; 0 as lower end: nothing holds it from below. */
  readonly lowNm: number;
  readonly highNm: number;
  /** Below this with 95 %; for a limit, of the width the feature shows. */
  readonly upper95Nm: number;
  /** Width of the feature as seen, tip included. For an edge: of its line spread, the same as `fwhmNm`. */
  readonly apparent: Width;
  /** The feature's own size (diameter of a dot, width of a bar) and its 95 % interval; null for an edge. */
  readonly size: { readonly nm: number; readonly lowNm: number; readonly highNm: number } | null;
  /** Apparent widths along the line and across it, and the p-value of their being one; null where the model has one direction. */
  readonly directions: { readonly along: Width; readonly across: Width; readonly pValue: number } | null;
  /** The width from the near side (towards `from`) and from the far side, and the p-value of their being one. */
  readonly sides: { readonly near: Width; readonly far: Width; readonly pValue: number };
  /** Middle of the feature. */
  readonly at: Place;
  /** Angle between the line and the feature's normal, degrees; the width is taken along the normal. 0 for a dot. */
  readonly tiltDeg: number;
  /** Step or peak over the pixel noise. */
  readonly contrastToNoise: number;
  readonly pixels: number;
  readonly reducedChi2: number;
  /** BIC of the other models less that of the chosen one; absent where a model could not be fitted. */
  readonly evidence: Partial<Record<TipModel | "nothing", number>>;
  /** Step in height under the feature where there is a topography. */
  readonly height: Width | null;
  readonly warnings: readonly TipWarning[];
}

export type TipResult =
  | TipMeasured
  | {
      readonly status: "unusable";
      readonly reason: "few-pixels" | "no-feature" | "not-converged" | "outside";
      readonly message: string;
    };
