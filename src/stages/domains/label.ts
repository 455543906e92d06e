import type { Tip } from "../../model/cooldown.js";
import type { DomainRegion, FrameDomains } from "../../model/domains.js";
import { METALLIC, NO_STATE, type DomainMap } from "../../model/signal.js";
import { componentRoots } from "./components.js";
import { croftonPerimeters } from "./perimeter.js";
import type { DomainSettings } from "./settings.js";

/** Least area of a domain in pixels: the setting, or the spot of the tip, and never below `leastPixels`. */
export function leastDomainPixels(map: DomainMap, tip: Tip | null, s: DomainSettings): number {
  const tipArea = tip === null ? 0 : Math.PI * (tip.resolutionNm / 2) ** 2;
  const areaNm2 = s.leastAreaNm2 > 0 ? s.leastAreaNm2 : tipArea;
  return Math.max(s.leastPixels, Math.ceil(areaNm2 / (map.pixel.xNm * map.pixel.yNm) - 1e-9));
}

/** The domains of one frame: metallic pixels join over corners (8 neighbours), insulating ones over sides only (4), so that
 *  exactly one state can cross the frame either way (Rosenfeld 1970, J. ACM 17, 146); unmeasured pixels join nothing.
 *
 *  A domain touches the border where it has a pixel on the image's edge, or beside unmeasured pixels that are connected to that
 *  edge (missing rows, an aborted scan): beyond either, nobody knows how it goes on. Debris or a scar inside the frame is no border.
 *  Areas and centroids are those of the domain's own pixels, centroids in frame nm (x = col·pixel.xNm); the perimeter is the
 *  length of its walls with other domains, holes included, and not counted along debris. */
export function labelDomains(map: DomainMap, frame: number, tip: Tip | null, s: DomainSettings): FrameDomains {
  const { rows, cols, states, pixel } = map;
  const n = rows * cols;
  const roots = componentRoots(map);
  const least = leastDomainPixels(map, tip, s);

  const size = new Int32Array(n);
  const edge = new Uint8Array(n);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const root = roots[i * cols + j];
      size[root]++;
      if (i === 0 || j === 0 || i === rows - 1 || j === cols - 1) edge[root] = 1;
    }
  }
  // Gaps that reach the edge pass it on to their neighbours (two passes would do; gaps do not pass it through domains).
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      if (states[p] !== NO_STATE || edge[roots[p]] === 0) continue;
      for (let a = Math.max(0, i - 1); a <= Math.min(rows - 1, i + 1); a++) {
        for (let b = Math.max(0, j - 1); b <= Math.min(cols - 1, j + 1); b++) {
          const q = a * cols + b;
          if (states[q] !== NO_STATE) edge[roots[q]] |= 2;
        }
      }
    }
  }

  const labelOf = new Int32Array(n);
  const labels = new Int32Array(n);
  const rootOf: number[] = [-1];
  for (let p = 0; p < n; p++) {
    const root = roots[p];
    if (states[p] === NO_STATE || size[root] < least) continue;
    if (labelOf[root] === 0) {
      labelOf[root] = rootOf.length;
      rootOf.push(root);
    }
    labels[p] = labelOf[root];
  }

  const count = rootOf.length;
  const sumX = new Float64Array(count);
  const sumY = new Float64Array(count);
  for (let i = 0, p = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, p++) {
      const label = labels[p];
      sumX[label] += j;
      sumY[label] += i;
    }
  }
  const perimeters = croftonPerimeters(labels, count, rows, cols, pixel);
  const regions: DomainRegion[] = [];
  for (let label = 1; label < count; label++) {
    const root = rootOf[label];
    const touchesBorder = edge[root] !== 0;
    regions.push({
      label,
      kind: states[root] === METALLIC ? "metallic" : "insulating",
      areaNm2: size[root] * pixel.xNm * pixel.yNm,
      perimeterNm: touchesBorder ? null : perimeters[label],
      xNm: (sumX[label] / size[root]) * pixel.xNm,
      yNm: (sumY[label] / size[root]) * pixel.yNm,
      touchesBorder,
    });
  }
  return { frame, map, labels, regions };
}
