import type { Tip } from "../../model/cooldown.js";
import { colsOf, makeRaster, rowsOf } from "../../model/raster.js";
import {
  INSULATING,
  METALLIC,
  NO_STATE,
  type CleanFrame,
  type FrameLevels,
  type FrameStates,
  type Signal,
} from "../../model/signal.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import { mixedFraction } from "./fraction.js";
import { clearIslands, fillState, hiddenSpots } from "./islands.js";
import { isScar, onChord } from "./island_tests.js";
import type { LevelFit } from "./level_fit.js";
import { pixelsPerIndependent } from "./noise.js";
import { readPixels, type Pixels } from "./pixels.js";
import { readShare, shareCurve, turnAtWalls, type ShareCurve } from "./share_curve.js";
import type { StatesSettings } from "./settings.js";
import { smoothShare } from "./smooth_share.js";

/** A round domain loses πσ² to the blur (see `mixedFraction`), and the smallest ones more: twice that is allowed for. */
const LOST_BY_BLUR = 2;

/** Signal, share of the metallic signal, domain map and metallic fraction of one frame.
 *
 *  The signal is the clean frame with the row corrections of `fit` taken off. The share is read from it (see `shareCurve`), noise
 *  and all; the map is read from the share smoothed just enough to keep noise from making domains, its small islands cleared. The
 *  fraction is of the usable pixels; its interval is for this field of view (see `mixedFraction`). In a frame that holds one state it
 *  is exactly 0 or 1, and the other end of the interval is the largest domain that could have been missed.
 *  Debris: its core has no state and is left out of the fraction; around it, where the signal is disturbed less than would change a
 *  state, the map goes on, but `signal.usable` is 0, so that nothing is fitted there.
 *  @param debris 0 free, 1 core, 2 disturbed around it
 *  @param fit what `fitLevels` gave for the same frame, debris and tip
 *  @param levels what `trackLevels` gave for it
 *  @returns `states.levels` has the final verdict: `mixed` exactly where the map holds both states */
export function mapStates(
  clean: CleanFrame,
  debris: Uint8Array | null,
  fit: LevelFit,
  levels: FrameLevels,
  tip: Tip | null,
  s: StatesSettings,
): { readonly signal: Signal; readonly states: FrameStates } {
  const [rows, cols] = [rowsOf(clean.amplitude), colsOf(clean.amplitude)];
  if (fit.rows !== rows || fit.cols !== cols) {
    throw new RangeError(`levels of ${fit.rows} × ${fit.cols} pixels for a frame of ${rows} × ${cols}`);
  }
  const z = readPixels(clean, debris, false, fit.correction);
  const { pixel } = z;
  const signal: Signal = {
    frame: clean.frame,
    rows,
    cols,
    pixel,
    re: z.re,
    im: z.hasPhase ? z.im : null,
    usable: debris === null ? z.usable : freeOf(z.usable, debris),
  };
  const map = { rows, cols, pixel, states: new Uint8Array(rows * cols).fill(NO_STATE) };
  let share: Float32Array | null = null;
  const result = (final: FrameLevels, fraction: FrameStates["fraction"]): { signal: Signal; states: FrameStates } => ({
    signal,
    states: {
      frame: clean.frame,
      levels: final,
      share: makeRaster(share ?? new Float32Array(rows * cols).fill(Number.NaN), rows, cols, pixel),
      map,
      fraction,
      rowGainSd: rowGainSd(clean, fit),
    },
  });
  if (levels.verdict === "undecided" || z.count === 0) return result({ ...levels, verdict: "undecided" }, null);

  const curve = shareCurve(
    levels.insulating,
    levels.metallic,
    levels.noiseInsulating,
    levels.noiseMetallic,
    z.hasPhase ? null : s.assumedPhaseStepRad,
  );
  const noiseSd = curve.sdHalf;
  const perIndependent = pixelsPerIndependent(levels.noiseCorrelationX, levels.noiseCorrelationY);
  const smoothingNm = smoothingFor(noiseSd * Math.sqrt(perIndependent), z, tip, s);
  const seen = readShare(z, curve, smoothingNm / pixel.xNm, smoothingNm / pixel.yNm);
  share = seen;
  const u = smoothShare(seen, z.usable, rows, cols, smoothingNm / pixel.xNm, smoothingNm / pixel.yNm);
  const dip = dipAtWalls(z, signal.usable, u, levels, curve);
  if (dip.value > 0) {
    for (let p = 0; p < u.length; p++) if (u[p] > 0 && u[p] < 1) u[p] += 4 * dip.value * u[p] * (1 - u[p]);
  }
  for (let p = 0; p < u.length; p++) {
    if (z.usable[p] === 1) map.states[p] = u[p] > 0.5 ? METALLIC : INSULATING;
  }
  const leastPx = leastDomainPx(z, tip, s);
  const cleared = clearIslands(
    map.states,
    rows,
    cols,
    leastPx,
    (pixels, state) => onChord(pixels, state, z, seen, levels, curve) && !isScar(pixels, state, z, seen, tip),
  );
  const [insulatingPx, metallicPx] = cleared.totalPx;
  const rarer = metallicPx < insulatingPx ? METALLIC : INSULATING;
  // a few lone spots in a frame of one state: believed only from a size that noise and missed particles do not reach
  if (cleared.largestPx[rarer] < s.leastLoneTips * leastPx) {
    const state = rarer === METALLIC ? INSULATING : METALLIC;
    fillState(map.states, state);
    return result(
      { ...levels, verdict: state === METALLIC ? "metallic" : "insulating" },
      oneStateFraction(state, z, leastPx, tip, s),
    );
  }
  const sigmaNm = tip === null ? 0 : tip.resolutionNm / FWHM_PER_SIGMA;
  const fraction = mixedFraction({
    rows,
    cols,
    pixel,
    states: map.states,
    u,
    blurSigmaNm: Math.hypot(sigmaNm, smoothingNm),
    blurRelativeSd: tip === null ? 0 : tip.resolutionSdNm / tip.resolutionNm,
    noiseSd,
    perIndependent,
    smoothingNm,
    thresholdSd: Math.hypot(levels.thresholdSd, dip.sd, z.hasPhase ? 0 : curve.perStepRad * s.assumedPhaseStepSdRad),
    rowSd: fit.rowLogGainSd,
    rowWalkSd: fit.rowWalkSd,
    rowWhiteSd: fit.rowWhiteSd,
    perLogGain: curve.perLogGain,
    hiddenPx: hiddenSpots(z.usable, rows, cols),
  });
  return result({ ...levels, verdict: "mixed" }, fraction);
}

/** The usable pixels that no debris disturbs. */
function freeOf(usable: Uint8Array, debris: Uint8Array): Uint8Array {
  const out = new Uint8Array(usable.length);
  for (let p = 0; p < out.length; p++) out[p] = debris[p] === 0 ? usable[p] : 0;
  return out;
}

/** What is left of each row's own gain: what cleaning could not tell, less what the pixels of known state have told since. */
function rowGainSd(clean: CleanFrame, fit: LevelFit): Float32Array | null {
  const before = clean.rowGainErrorSd;
  if (before === undefined || before === null) return null;
  return before.map((sd, i) => (fit.rowWhiteSd > 0 ? 1 / Math.hypot(1 / sd, 1 / fit.rowLogGainSd[i]) : sd));
}

/** Loss of amplitude at a wall over the square of the turn seen there, and its standard deviation: ⅓ where the turn begins with a jump at
 *  the wall, 1 where it grows from there (second order of exp(iθ) under the blur). */
const DIP_PER_TURN2 = 0.8;
const DIP_SD_PER_TURN2 = 0.5;
const TURN_SIGMAS = 3;

/** What a fringe takes off the share at the walls: phases that differ under the tip add up to less amplitude than they have. The turn is
 *  measured at the walls; what the correction leaves is in its standard deviation. Along the chord a turn acts to first order, and
 *  counts as uncertainty only. */
function dipAtWalls(
  z: Pixels,
  free: Uint8Array,
  u: Float32Array,
  levels: FrameLevels,
  curve: ShareCurve,
): { readonly value: number; readonly sd: number } {
  const turn = turnAtWalls(z, free, u, levels.insulating, levels.metallic);
  if (turn === null || Math.abs(turn.meanRad) < TURN_SIGMAS * turn.sdRad) return { value: 0, sd: 0 };
  if (curve.reads === "chord") {
    const { insulating: a, metallic: b } = levels;
    const cross = 0.5 * Math.abs((a.im + b.im) * (b.re - a.re) - (a.re + b.re) * (b.im - a.im));
    return { value: 0, sd: (Math.abs(turn.meanRad) * cross) / ((b.re - a.re) ** 2 + (b.im - a.im) ** 2) };
  }
  const unit = turn.meanRad ** 2 * curve.perLogGain;
  return { value: DIP_PER_TURN2 * unit, sd: DIP_SD_PER_TURN2 * unit };
}

/** Smoothing of the map in nm: enough that its noise is a small share of the contrast, within the limits of the settings. */
function smoothingFor(noiseSd: number, z: Pixels, tip: Tip | null, s: StatesSettings): number {
  const pixelNm = Math.sqrt(z.pixel.xNm * z.pixel.yNm);
  const tipNm = tip === null ? 1.3 * pixelNm : tip.resolutionNm / FWHM_PER_SIGMA;
  const least = Math.max(s.leastSmoothingPx * pixelNm, s.smoothingTipSigmas * tipNm);
  const needed = (noiseSd / s.smoothingNoise / (2 * Math.sqrt(Math.PI))) * pixelNm;
  return Math.max(least, Math.min(needed, Math.max(tipNm, pixelNm)));
}

function leastDomainPx(z: Pixels, tip: Tip | null, s: StatesSettings): number {
  const pixelArea = z.pixel.xNm * z.pixel.yNm;
  const areaNm2 = s.leastDomainNm2 > 0 ? s.leastDomainNm2 : tip === null ? 0 : Math.PI * (tip.resolutionNm / 2) ** 2;
  return Math.max(s.leastDomainPx, areaNm2 / pixelArea);
}

/** Exactly 0 or 1, with the largest domain that could have been missed as the other end of the interval: the least area, made smaller
 *  by the blur of a round domain. */
function oneStateFraction(
  state: 0 | 1,
  z: Pixels,
  leastPx: number,
  tip: Tip | null,
  s: StatesSettings,
): { value: number; low: number; high: number } {
  const sigmaNm = tip === null ? 0 : tip.resolutionNm / FWHM_PER_SIGMA;
  const lost = (LOST_BY_BLUR * Math.PI * sigmaNm * sigmaNm) / (z.pixel.xNm * z.pixel.yNm);
  const missed = Math.min(1, (s.leastLoneTips * leastPx + lost) / z.count);
  return state === METALLIC ? { value: 1, low: 1 - missed, high: 1 } : { value: 0, low: 0, high: missed };
}
