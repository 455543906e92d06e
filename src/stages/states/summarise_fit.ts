import type { NoiseCovariance } from "../../model/signal.js";
import type { Levels } from "./cell_levels.js";
import type { LevelFit, StateEstimate, StateEvidence } from "./level_fit.js";
import { pixelsPerIndependent, sdAlong } from "./noise.js";
import { noCorrection, type Pixels, type RowCorrection } from "./pixels.js";
import type { PureCells } from "./pure.js";
import type { RowRefinement } from "./refine_rows.js";

/** How wrong the tail of a wall may be as a tanh, as a share of itself: it enters the uncertainty of the levels. */
const TAIL_ERROR = 0.25;

/** The fit of a frame with two states.
 *  @param share1 share of the usable pixels on the second level's side */
export function twoStateFit(
  frame: number,
  raw: Pixels,
  share1: number,
  pure: PureCells,
  levels: Levels,
  noise: readonly [NoiseCovariance, NoiseCovariance],
  evidence: StateEvidence,
  correction: RowCorrection,
  rows: RowRefinement | null,
  correlation: { readonly x: number; readonly y: number },
): LevelFit {
  const [a, b] = levels;
  const contrast = Math.hypot(b.re - a.re, b.im - a.im);
  const perIndependent = pixelsPerIndependent(correlation.x, correlation.y);
  const own = ([0, 1] as const).map((k) => {
    const level = levels[k];
    const m = Math.max(Math.hypot(level.re, level.im), 1e-30);
    const n = Math.max(1, pure.count[k] / perIndependent);
    return {
      log2: sdAlong(noise[k], level.re / m, level.im / m) ** 2 / (m * m * n),
      phase2: sdAlong(noise[k], -level.im / m, level.re / m) ** 2 / (m * m * n),
      tail: (TAIL_ERROR * pure.tail[k] * contrast) / m,
    };
  });
  // what the rows add to the error of the contrast is shared out evenly
  const fromRows = (sd: number | undefined, white: number): number =>
    sd === undefined || !Number.isFinite(sd) ? 0 : 0.5 * Math.max(0, sd * sd - white);
  const rowLog2 = fromRows(rows?.gain.contrastSd, own[0].log2 + own[1].log2);
  const rowPhase2 = fromRows(rows?.phase.contrastSd, own[0].phase2 + own[1].phase2);
  const estimate = (k: 0 | 1): StateEstimate => ({
    level: levels[k],
    logSd: Math.sqrt(own[k].log2 + own[k].tail ** 2 + rowLog2),
    phaseSdRad: Math.sqrt(own[k].phase2 + own[k].tail ** 2 + rowPhase2),
    tailSd: own[k].tail,
    noise: noise[k],
    purePixels: pure.count[k],
    share: k === 1 ? share1 : 1 - share1,
  });
  const main = share1 > 0.5 ? 1 : 0;
  return {
    ...commonPart(frame, raw, correction, rows, correlation),
    main: estimate(main),
    second: estimate(main === 1 ? 0 : 1),
    evidence,
    apparentWidthNm: Number.isNaN(pure.apparentWidthNm) ? null : pure.apparentWidthNm,
  };
}

/** What a fit tells whatever it found. */
export function commonPart(
  frame: number,
  raw: Pixels,
  correction: RowCorrection,
  rows: RowRefinement | null,
  correlation: { readonly x: number; readonly y: number },
): Omit<LevelFit, "main" | "second" | "evidence" | "apparentWidthNm"> {
  return {
    frame,
    rows: raw.rows,
    cols: raw.cols,
    hasPhase: raw.hasPhase,
    usablePixels: raw.count,
    correction,
    rowLogGainSd: rows === null ? new Float32Array(raw.rows) : Float32Array.from(rows.gain.measurementSd),
    rowWalkSd: rows?.gain.walkSd ?? 0,
    rowWhiteSd: rows?.gain.whiteSd ?? 0,
    noiseCorrelationX: correlation.x,
    noiseCorrelationY: correlation.y,
  };
}

/** The fit of a frame with too few usable pixels. */
export function emptyFit(frame: number, raw: Pixels): LevelFit {
  return {
    ...commonPart(frame, raw, noCorrection(raw.rows), null, { x: 0, y: 0 }),
    main: null,
    second: null,
    evidence: { deltaBic: 0, separation: 0, clustering: 0, twoStates: false },
    apparentWidthNm: null,
  };
}
