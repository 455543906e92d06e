import type { ChannelName } from "./cooldown.js";
import type { ComplexValue } from "./signal.js";

/* What figures need beyond the numbers of the tables: small, made once while the frames are at hand, never an input of an analysis. */

/** One channel of a frame made small. Amplitude: corrected, divided by the frame's gain. Phase: turned so that the insulating state is at 0,
 *  averaged as an angle. Topography: levelled, nm. */
export interface Preview {
  readonly channel: ChannelName;
  readonly rows: number;
  readonly cols: number;
  /** Pixels of the frame that a pixel of the preview is the mean of, along x and y; fewer at the last column and row. */
  readonly stepX: number;
  readonly stepY: number;
  /** What the codes 0 and 255 stand for; values beyond are cut there. */
  readonly low: number;
  readonly high: number;
  /** Lossless WebP: the code in every colour, alpha 0 where less than half was measured. */
  readonly image: Uint8Array;
}

/** Numbers a bin in `ProfileBins.bins`: signed distance in nm from the fitted wall, share of the metallic signal, its sd. */
export const PROFILE_COLUMNS = 3;

/** The pixels of one wall profile, averaged in bins of distance, on the scale of the fit's own two levels (0 insulating, 1 metallic).
 *  The share of a bin is the fitted curve at its mean distance plus the mean residual of its pixels. */
export interface ProfileBins {
  readonly wall: number;
  readonly profile: number;
  /** The fitted curve: ½(1 + tanh(d/w)) blurred by a Gaussian of this sigma. */
  readonly wNm: number;
  readonly sigmaNm: number;
  /** Row-major, `PROFILE_COLUMNS` a bin. */
  readonly bins: Float32Array;
}

/** Numbers a bin in `FringeBins.bins`: signed distance in nm; re, im of the mean signal; sd of its phase in rad; re, im of the null
 *  (the two states alone, levels off by what the fit allows); re, im of the fit. */
export const FRINGE_COLUMNS = 8;

/** The signal beside one tested stretch of wall in bins of distance, in units of the frame's insulating level (which is 1 + 0i). */
export interface FringeBins {
  readonly metallic: ComplexValue;
  /** Row-major, `FRINGE_COLUMNS` a bin. */
  readonly bins: Float32Array;
}

/** One measured pair of frames: where `moving` was found relative to `reference`, nm in the cooldown's coordinates. */
export interface DriftPair {
  readonly reference: number;
  readonly moving: number;
  readonly xNm: number;
  readonly yNm: number;
  readonly sdXNm: number;
  readonly sdYNm: number;
  /** False where the pair disagreed with the others and placed no frame. */
  readonly used: boolean;
}
