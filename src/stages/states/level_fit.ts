import type { ComplexValue, NoiseCovariance } from "../../model/signal.js";
import type { RowCorrection } from "./pixels.js";

/** One state as seen in one frame. */
export interface StateEstimate {
  /** Level in the frame's signal after the row corrections. */
  readonly level: ComplexValue;
  /** Standard deviation of the logarithm of its amplitude, and of its phase in rad. */
  readonly logSd: number;
  readonly phaseSdRad: number;
  /** The part of either that comes from the tails of the walls: it is alike in frames that are alike, and does not average out. */
  readonly tailSd: number;
  /** Covariance of the pixel noise. */
  readonly noise: NoiseCovariance;
  /** Pixels of this state far from walls. */
  readonly purePixels: number;
  /** Share of the usable pixels on this state's side of the half contour. */
  readonly share: number;
}

/** Why a frame is said to hold two states, or not. */
export interface StateEvidence {
  /** Bayesian information criterion of two states and their walls less that of one, at the effective number of pixels. */
  readonly deltaBic: number;
  /** Distance of the levels in standard deviations of the pixel noise. */
  readonly separation: number;
  /** Share of minority pixels' neighbours that are minority too: near the share itself in noise, near 1 in domains. */
  readonly clustering: number;
  readonly twoStates: boolean;
}

/** What one frame tells about the levels of its states. Small and plain: it travels between threads. */
export interface LevelFit {
  readonly frame: number;
  readonly rows: number;
  readonly cols: number;
  readonly hasPhase: boolean;
  readonly usablePixels: number;
  /** The state that most pixels show; null where the frame holds too few usable pixels. */
  readonly main: StateEstimate | null;
  /** The other state, where the frame holds both. */
  readonly second: StateEstimate | null;
  readonly evidence: StateEvidence;
  /** 10–90 rise of the walls as seen, from their share of the pixels, nm; null without two states. */
  readonly apparentWidthNm: number | null;
  /** What is taken off the clean frame's rows and columns. */
  readonly correction: RowCorrection;
  /** Uncertainty of the row gains, for the interval of the fraction: a row's own measurement (Infinity without one), the walk's step
   *  and the independent part, all of the logarithm of the gain. */
  readonly rowLogGainSd: Float32Array;
  readonly rowWalkSd: number;
  readonly rowWhiteSd: number;
  /** Correlation of the noise of neighbouring pixels, measured far from walls. */
  readonly noiseCorrelationX: number;
  readonly noiseCorrelationY: number;
}
