import type { FringeBins, ProfileBins } from "./pictures.js";

/** One connected boundary line between the states, in one frame. Points in the frame's own nm (x = col·pixel.xNm,
 *  y = row·pixel.yNm). Which side is metallic is told by `normals`, not by the walking direction. */
export interface Wall {
  /** Index in the frame, from 0. */
  readonly wall: number;
  /** Interleaved x, y in nm of the frame, smoothed, at near even arc spacing. */
  readonly points: Float64Array;
  /** Unit normals interleaved (nx along columns, ny along rows), pointing to the metallic side, at each point. */
  readonly normals: Float64Array;
  /** Arc length at each point, nm. */
  readonly arcNm: Float64Array;
  readonly closed: boolean;
  readonly lengthNm: number;
}

/** Why a profile's numbers should not enter statistics; "" = sound. */
export type ProfileFlag =
  "" | "near-other-wall" | "few-pixels" | "plateau-not-reached" | "not-converged" | "poor-fit" | "curved" | "no-tip";

/** One fitted profile; see the `walls` table of the exported data for the columns. Frame nm, no drift added. */
export interface WallProfile {
  readonly wall: number;
  /** Index along the wall, from 0. */
  readonly profile: number;
  readonly xNm: number;
  readonly yNm: number;
  readonly normalDeg: number;
  readonly arcNm: number;
  /** Length of wall that the profile's pixels stand for, nm. */
  readonly stretchNm: number;
  readonly widthNm: number | null;
  readonly widthSdNm: number | null;
  readonly widthSdTipNm: number | null;
  readonly widthUpper95Nm: number | null;
  /** null where there is no tip resolution. */
  readonly resolved: boolean | null;
  readonly apparentWidthNm: number | null;
  /** Own noise of the apparent width, one standard deviation. */
  readonly apparentWidthSdNm?: number | null;
  /** Width below which this profile's noise (and tip) would not have let it be called resolved: the limit that an unresolved one is
   *  censored at in statistics. */
  readonly detectionLimitNm?: number | null;
  readonly amplitudeInsulating: number | null;
  readonly amplitudeMetallic: number | null;
  readonly reducedChi2: number | null;
  readonly pixels: number;
  readonly flag: ProfileFlag;
}

export interface FrameWalls {
  readonly frame: number;
  readonly walls: readonly Wall[];
  readonly profiles: readonly WallProfile[];
  readonly wallLengthNm: number;
  /** The pixels of the profiles in bins, for drawing. */
  readonly bins?: readonly ProfileBins[];
}

/** Width statistics of one frame, limits treated as limits. */
export interface WidthSummary {
  readonly profiles: number;
  readonly medianNm: number | null;
  readonly medianLowNm: number | null;
  readonly medianHighNm: number | null;
  readonly unresolvedShare: number | null;
}

/** One wall, or stretch of one, tested for a fringe. `detected` is set by the control over the cooldown. */
export interface FringeTest {
  readonly frame: number;
  readonly wall: number;
  readonly stretch: number;
  /** Arc range on the wall, nm. */
  readonly arcFromNm: number;
  readonly arcToNm: number;
  readonly pValue: number;
  readonly side: "metallic" | "insulating";
  readonly contrastRad: number | null;
  readonly contrastSdRad: number | null;
  readonly offsetNm: number | null;
  readonly periodNm: number | null;
  readonly periodSdNm: number | null;
  readonly decayNm: number | null;
  readonly decaySdNm: number | null;
  /** The signal beside it in bins, for drawing. */
  readonly drawn?: FringeBins;
}
