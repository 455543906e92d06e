/** One frame as the tests see it. Row-major. */
export interface Grid {
  /** Component of the signal across the chord. */
  readonly across: Float32Array;
  /** Signed distance from the nearest wall, nm. */
  readonly distanceNm: Float32Array;
  readonly trusted: Uint8Array;
  readonly rows: number;
  readonly cols: number;
}

/** Residuals beyond this many standard deviations count as this many: what is left of debris and scars is no noise. */
export const CLIP = 5;
