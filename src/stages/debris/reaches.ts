import type { Tip } from "../../model/cooldown.js";
import type { PixelSize } from "../../model/raster.js";
import type { DebrisSettings } from "./settings.js";

/** Radius of the ring of surroundings and width of the margin, in columns and rows. */
export function reaches(
  pixel: PixelSize,
  tip: Tip | null,
  s: DebrisSettings,
): { ringXPx: number; ringYPx: number; marginXPx: number; marginYPx: number } {
  const typical = Math.sqrt(pixel.xNm * pixel.yNm);
  const spotNm = Math.max(tip?.resolutionNm ?? 3 * typical, typical);
  const ringNm = s.ringNm > 0 ? s.ringNm : Math.max(4 * spotNm, 8 * typical);
  const marginNm = s.marginTips * spotNm;
  return {
    ringXPx: ringNm / pixel.xNm,
    ringYPx: ringNm / pixel.yNm,
    marginXPx: marginNm / pixel.xNm,
    marginYPx: marginNm / pixel.yNm,
  };
}
