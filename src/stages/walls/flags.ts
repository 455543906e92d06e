import type { ProfileFlag } from "../../model/walls.js";
import type { ProfileEstimate } from "./estimate.js";
import type { WallsSettings } from "./settings.js";

/** What surrounds a profile, for judging it. Lengths in nm. */
export interface Surroundings {
  /** Width as seen of the walls around, the profile's own left out. */
  readonly apparentNm: number;
  readonly freeInsulatingNm: number;
  readonly freeMetallicNm: number;
  readonly curvaturePerNm: number;
  readonly contrast: number;
  readonly frameLevels: { readonly insulating: number; readonly metallic: number };
}

/** Gap to the next wall, in apparent widths, below which plateaux cannot be told from tails. */
const LEAST_GAP = 2;
/** A plateau counts as seen beyond this many apparent widths from the wall … */
const PLATEAU_FROM = 0.6;
/** … where it holds at least this share of the pixels … */
const PLATEAU_SHARE = 0.04;
/** … and its level is known to this share of the contrast. */
const LEVEL_SD = 0.1;
/** A local level may differ from the frame's by this share of the contrast before the plateau is doubted. */
const LEVEL_SLACK = 0.06;
/** Largest product of curvature and apparent width. */
const LARGEST_BEND = 1;

/** Why a profile's numbers should not enter statistics; "" where they may. Nothing here depends on the profile's own fitted width: a limit
 *  on it would keep the narrow half of the scatter.
 *  @param offCentreNm distance of each pixel from the fitted middle of the wall */
export function flagOf(
  offCentreNm: ArrayLike<number>,
  e: ProfileEstimate | null,
  around: Surroundings,
  s: WallsSettings,
): ProfileFlag {
  if (e === null || offCentreNm.length < s.leastPixels) return "few-pixels";
  if (!e.converged || Math.abs(e.centreNm) > around.apparentNm || e.upper95Nm === null) return "not-converged";
  const apparent = around.apparentNm;
  if (2 * Math.min(around.freeInsulatingNm, around.freeMetallicNm) < LEAST_GAP * apparent) return "near-other-wall";
  let below = 0;
  let above = 0;
  for (let k = 0; k < offCentreNm.length; k++) {
    const x = offCentreNm[k];
    if (x < -PLATEAU_FROM * apparent) below++;
    else if (x > PLATEAU_FROM * apparent) above++;
  }
  if (Math.min(below, above) < Math.max(3, PLATEAU_SHARE * offCentreNm.length)) return "plateau-not-reached";
  for (const state of ["insulating", "metallic"] as const) {
    if (!(e.levelSd[state] <= LEVEL_SD * around.contrast)) return "plateau-not-reached";
    const off = Math.abs(e[state] - around.frameLevels[state]);
    if (off > LEVEL_SLACK * around.contrast + 3 * e.levelSd[state]) return "plateau-not-reached";
  }
  if (around.curvaturePerNm * apparent > LARGEST_BEND) return "curved";
  if (e.reducedChi2 > 1 + Math.max(0.3, 4.5 * e.reducedChi2Sd)) return "poor-fit";
  return "";
}
