import type { ExcludedRegion, FrameInfo } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import type { PixelSize } from "../model/raster.js";
import { countOf } from "../model/text.js";
import type { ExcludeEntry } from "./schema.js";
import type { YamlDocument } from "./yaml_document.js";

/** What is left out, by the numbers that the frames have as long as some of those described are still to come; what lies in those is left
 *  for later. */
export function renumberExclusions(
  entries: readonly ExcludeEntry[],
  series: readonly { readonly frames: readonly unknown[]; readonly described: number }[],
): ExcludeEntry[] {
  return entries.flatMap((e) => {
    let [from, there] = [0, 0];
    for (const s of series) {
      const k = e.frame - from;
      if (k < s.described) return k < s.frames.length ? [{ ...e, frame: there + k }] : [];
      from += s.described;
      there += s.frames.length;
    }
    // Beyond all that is described: told as ever.
    return [{ ...e, frame: Math.max(there, e.frame) }];
  });
}

/** The frames with what the user leaves out of them. A frame that does not exist, or a region that lies outside it, is a problem. */
export function withExclusions(
  frames: readonly FrameInfo[],
  entries: readonly ExcludeEntry[],
  pixel: PixelSize | null,
  doc: YamlDocument,
  problems: Problem[],
): FrameInfo[] {
  const out = [...frames];
  entries.forEach((e, k) => {
    const info = out[e.frame];
    if (info === undefined) {
      problems.push({
        at: doc.at(["exclude", k, "frame"]),
        problem: `no frame ${e.frame}; the cooldown has ${countOf(frames.length, "frame")}, counted from 0`,
        fix: "give the number of a frame in the order of this file",
      });
      return;
    }
    if (e.region_nm === undefined) {
      out[e.frame] = { ...info, excluded: e.reason };
      return;
    }
    const [x0Nm, y0Nm, x1Nm, y1Nm] = e.region_nm;
    const size = pixel === null ? null : { xNm: (info.cols - 1) * pixel.xNm, yNm: (info.rows - 1) * pixel.yNm };
    const at = doc.at(["exclude", k, "region_nm"]);
    if (x1Nm < x0Nm || y1Nm < y0Nm) {
      const fix = "give left, top, right, bottom";
      problems.push({ at, problem: `a region from (${x0Nm}, ${y0Nm}) to (${x1Nm}, ${y1Nm})`, fix });
      return;
    }
    if (size !== null && (x1Nm < 0 || y1Nm < 0 || x0Nm > size.xNm || y0Nm > size.yNm)) {
      const problem = `the region lies outside the frame, which reaches to (${size.xNm}, ${size.yNm}) nm`;
      problems.push({ at, problem, fix: "give it in nm from the frame's first pixel, without drift" });
      return;
    }
    const region: ExcludedRegion = { x0Nm, y0Nm, x1Nm, y1Nm, reason: e.reason };
    out[e.frame] = { ...info, excludedRegions: [...(info.excludedRegions ?? []), region] };
  });
  return out;
}
