import type { Notice } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import type { PixelSize } from "../model/raster.js";
import { plainText } from "../model/text.js";
import { samePixel, type HeaderBook } from "./image_headers.js";
import type { CooldownEntry } from "./schema.js";
import { isMisspelt, wrongValue } from "./schema_problems.js";
import { isRecord, type YamlDocument } from "./yaml_document.js";

/**
 * The pixel size of a cooldown: as the YAML file says, else as its images say of themselves. Where both stand and differ, the YAML file
 * holds and it is told; where neither says it, or the images disagree, it is a problem.
 */
export function findPixelSize(
  scan: CooldownEntry["scan"],
  claims: HeaderBook["pixelClaims"],
  doc: YamlDocument,
  problems: Problem[],
  notices: Notice[],
): PixelSize | null {
  const written = scan?.pixel_size_nm;
  const words = (p: PixelSize): string => `${p.xNm} × ${p.yNm} nm`;
  if (written !== undefined) {
    const pixel = { xNm: written[0], yNm: written[1] };
    for (const c of claims) {
      if (samePixel(c.pixel, pixel)) continue;
      const message = `pixels of ${words(pixel)} as described, but ${plainText(c.label)} says ${words(c.pixel)}: the description is used`;
      notices.push({ frame: null, code: "pixel-size-differs", message });
    }
    return pixel;
  }
  const [first, second] = claims;
  if (first !== undefined && second === undefined) {
    const message = `pixels of ${words(first.pixel)}, as ${plainText(first.label)} says`;
    notices.push({ frame: null, code: "pixel-size-from-file", message });
    return first.pixel;
  }
  if (first !== undefined && second !== undefined) {
    problems.push({
      at: doc.at(["scan"]),
      problem: `no pixel_size_nm, and the files disagree: ${plainText(first.label)} says ${words(first.pixel)}, ${plainText(second.label)} ${words(second.pixel)}`,
      fix: "add `scan: { pixel_size_nm: [ … ] }` with the true one",
    });
    return null;
  }
  if (!isRecord(doc.value)) return null; // said already
  const raw = doc.value["scan"];
  if (raw === undefined && !isMisspelt(doc, [], "scan")) problems.push(wrongValue(["scan"], undefined, doc));
  else if (isRecord(raw) && raw["pixel_size_nm"] === undefined && !isMisspelt(doc, ["scan"], "pixel_size_nm")) {
    problems.push(wrongValue(["scan", "pixel_size_nm"], undefined, doc));
  }
  return null;
}
