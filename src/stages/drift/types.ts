import type { PixelSize } from "../../model/raster.js";

/** What one frame gives to registration; plain data, so that it can be kept aside and read again. */
export interface DriftImage {
  readonly frame: number;
  readonly rows: number;
  readonly cols: number;
  readonly pixel: PixelSize;
  /** `amplitude` where there is no topography: domains move with temperature, the sample's own marks do not. */
  readonly channel: "topography" | "amplitude";
  /** Row-major; 0 where `usable` is 0, and not to be read there. Rows have their median taken off. */
  readonly values: Float32Array;
  /** 1 = measured. */
  readonly usable: Uint8Array;
  /** For `amplitude`: the marks that stay when the states change (deviation from the state's own level), usable away from walls
   *  only. null for `topography`. */
  readonly marks: { readonly values: Float32Array; readonly usable: Uint8Array; readonly blurNm: number } | null;
  /** Blur (standard deviation, nm) at which this frame's signal and noise give the smallest error of a shift. */
  readonly blurNm: number;
}

/** Position of `moving` minus position of `reference`: what to add to a place in `moving` to reach the same feature in `reference`
 *  (a feature that moved by +d in the image gives −d). */
export interface MeasuredShift {
  readonly reference: number;
  readonly moving: number;
  /** `ambiguous`: another peak of the correlation is nearly as high, or the peak is low or made by one or two particles: alone it places no frame. */
  readonly status: "ok" | "ambiguous";
  readonly xNm: number;
  readonly yNm: number;
  /** Covariance of (x, y), nm². */
  readonly xxNm2: number;
  readonly xyNm2: number;
  readonly yyNm2: number;
  /** Shift at the last row minus shift at the first one (drift during the scan), and its standard deviation. */
  readonly stretch: { readonly xNm: number; readonly yNm: number; readonly sdXNm: number; readonly sdYNm: number };
  /** Share of the smaller frame that both saw. */
  readonly overlap: number;
  /** Height of the coarse peak in standard deviations of the correlation elsewhere; second peak over it. */
  readonly peak: number;
  readonly ratio: number;
  /** Share of the covariance that is the two frames' own noise, common to all pairs of a frame; the rest is new in each pair. */
  readonly framed: number;
  /** Correlation over the overlap after the fine step. */
  readonly correlation: number;
  /** Number of places in the overlap that make it: about 1 where a single particle lies on another. */
  readonly features: number;
  readonly channel: "topography" | "amplitude" | "marks";
  /** Pixel, and size of the moving frame, nm. */
  readonly pixel: PixelSize;
  readonly widthNm: number;
  readonly heightNm: number;
}

export interface FailedShift {
  readonly reference: number;
  readonly moving: number;
  readonly status: "failed";
  readonly reason: "no-peak" | "not-converged" | "no-structure";
}

/** The answer of one pair; a failed pair has no numbers to misuse. */
export type PairShift = MeasuredShift | FailedShift;
