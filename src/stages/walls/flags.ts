import type { ProfileFlag } from "../../model/walls.js";
import type { ProfileEstimate } from "./estimate.js";
import type { ProfileData } from "./profile_data.js";
import type { WallsSettings } from "./settings.js";

/** What surrounds a profile, for judging it. Lengths in nm. */
export interface Surroundings {
  /** Width as seen of all the frame's walls together. */
  readonly apparentNm: number;
  readonly reachNm: number;
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

/** Why a profile's numbers should not enter statistics; "" where they may. */
export function flagOf(
  data: ProfileData,
  e: ProfileEstimate | null,
  around: Surroundings,
  s: WallsSettings,
): ProfileFlag {
  if (e === null || data.count < s.leastPixels) return "few-pixels";
  if (!e.converged || Math.abs(e.centreNm) > around.apparentNm || e.upper95Nm === null) return "not-converged";
  // a fit whose plateaux are out of reach comes out too narrow; the frame's width stands in for it
  const apparent = Math.max(e.apparentNm, 0.7 * around.apparentNm);
  if (2 * Math.min(around.freeInsulatingNm, around.freeMetallicNm) < LEAST_GAP * apparent) return "near-other-wall";
  let below = 0;
  let above = 0;
  for (let k = 0; k < data.count; k++) {
    const x = data.distance[k] - e.centreNm;
    if (x < -PLATEAU_FROM * apparent) below++;
    else if (x > PLATEAU_FROM * apparent) above++;
  }
  if (Math.min(below, above) < Math.max(3, PLATEAU_SHARE * data.count)) return "plateau-not-reached";
  for (const state of ["insulating", "metallic"] as const) {
    if (e.levelSd[state] > LEVEL_SD * around.contrast) return "plateau-not-reached";
    const off = Math.abs(e[state] - around.frameLevels[state]);
    if (off > LEVEL_SLACK * around.contrast + 3 * e.levelSd[state]) return "plateau-not-reached";
  }
  if (around.curvaturePerNm * apparent > LARGEST_BEND) return "curved";
  if (e.reducedChi2 > 1 + Math.max(0.3, 4.5 * e.reducedChi2Sd)) return "poor-fit";
  return "";
}
