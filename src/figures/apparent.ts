import { quantile } from "../numerics/quantile.js";
import { num, word, type Row } from "./rows.js";

/** Apparent widths of one frame, the tip's blur in them. */
export interface ApparentWidths {
  readonly profiles: number;
  readonly medianNm: number;
  /** First and third quartile over the profiles: how far the walls of the frame differ, noise included; no interval of the median. */
  readonly lowQuartileNm: number;
  readonly highQuartileNm: number;
}

/** What the sound profiles of a frame show where no tip's resolution is known; null where there is none.
 *  @param profiles rows of `walls` of one frame */
export function apparentWidths(profiles: readonly Row[]): ApparentWidths | null {
  const seen = profiles
    .filter((r) => word(r, "flag") === "")
    .map((r) => num(r, "apparent_width_nm"))
    .filter((v) => v !== null);
  if (seen.length === 0) return null;
  const at = (p: number): number => quantile(seen, p);
  return { profiles: seen.length, medianNm: at(0.5), lowQuartileNm: at(0.25), highQuartileNm: at(0.75) };
}
