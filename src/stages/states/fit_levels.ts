import type { Tip } from "../../model/cooldown.js";
import type { CleanFrame } from "../../model/signal.js";
import { seeSignal } from "./cells.js";
import { fitOneState } from "./fit_one_state.js";
import { fitTwoStates } from "./fit_two_states.js";
import type { LevelFit } from "./level_fit.js";
import { noCorrection, readPixels } from "./pixels.js";
import type { StatesSettings } from "./settings.js";
import { smoothingOf } from "./smooth_signal.js";
import { differenceNoise } from "./split.js";
import { emptyFit } from "./summarise_fit.js";

/** Frames with fewer usable pixels tell nothing. */
const LEAST_PIXELS = 200;

/** Levels of the states in one frame, with what is left of its row gains and phases.
 *
 *  Two candidate levels come from a mixture with a partial-volume part on the smoothed frame (Santago & Gage 1995); they are then
 *  fitted to raw pixels far from every wall, in turns with the row offsets, which are taken from pixels of known state only, so that
 *  neither eats the contrast of the other. Two states are believed only with all of: criterion, separation, contrast, domains
 *  instead of scattered pixels, and a core of pure pixels. A frame that fails is fitted as one state, everything unlike it left out.
 *  @param clean a clean frame
 *  @param debris 1 = debris, row-major; null = none known
 *  @returns `main` null where the frame has too few usable pixels */
export function fitLevels(clean: CleanFrame, debris: Uint8Array | null, tip: Tip | null, s: StatesSettings): LevelFit {
  const raw = readPixels(clean, debris);
  if (raw.count < LEAST_PIXELS) return emptyFit(clean.frame, raw);
  const seen = seeSignal(raw, smoothingOf(raw, tip));
  const noise0 = differenceNoise(raw);
  const before = noCorrection(raw.rows);
  return fitTwoStates(clean.frame, raw, seen, noise0, before, tip, s) ?? fitOneState(clean.frame, seen, noise0, tip, s);
}
