import type { FrameInfo } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import type { PixelSize } from "../model/raster.js";
import { LEAST_SIDE_PX } from "./least_size.js";
import type { CooldownEntry } from "./schema.js";
import type { YamlDocument } from "./yaml_document.js";

/** A tip may be as wide as this part of the field's shorter side: beyond it no frame holds a domain, a wall and what lies between. */
const LARGEST_PART = 1 / 4;

/** A tip too wide for the field that it scanned. Frames too small for any tip are not told of here (`sizeProblems`). */
export function tipProblems(
  tip: CooldownEntry["tip"],
  frames: readonly FrameInfo[],
  pixel: PixelSize | null,
  doc: YamlDocument,
): Problem[] {
  const f = frames[0];
  if (tip === undefined || pixel === null || f === undefined || Math.min(f.rows, f.cols) < LEAST_SIDE_PX) return [];
  const [x, y] = [f.cols * pixel.xNm, f.rows * pixel.yNm];
  const most = LARGEST_PART * Math.min(x, y);
  if (tip.resolution_nm <= most) return [];
  const nm = (v: number): string => `${Number(v.toPrecision(6))}`;
  return [
    {
      at: doc.at(["tip", "resolution_nm"]),
      problem: `tip.resolution_nm is ${nm(tip.resolution_nm)} nm in a field of ${nm(x)} × ${nm(y)} nm; expected at most a quarter of its shorter side, ${nm(most)} nm`,
      fix: "most likely a slip of units (pm or µm for nm), here or in the pixel size: give the full width at half maximum in nm, or leave `tip` out",
    },
  ];
}
