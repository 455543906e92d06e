import type { Tip } from "../../model/cooldown.js";
import { dataOf, type PixelSize } from "../../model/raster.js";
import { METALLIC, NO_STATE, type FrameStates } from "../../model/signal.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import type { Wall } from "../../model/walls.js";
import { traceContours } from "../../raster/contours.js";
import { maskedBlur } from "../../raster/masked_blur.js";
import { shareNoise } from "./noise.js";
import { keepMappedDomains } from "./mapped_domains.js";
import { smoothLine } from "./smooth_line.js";
import type { WallsSettings } from "./settings.js";

/** The walls of one frame with what tracing them has shown. */
export interface Tracing {
  readonly walls: Wall[];
  /** Row-major: 1 where the blurred signal shows a patch that the domain map does not have; its surroundings are no plateau. */
  readonly patches: Uint8Array;
  /** Typical slope of the (blurred) share across a wall, 1/nm; NaN without walls. */
  readonly slopePerNm: number;
  /** Blur that the walls were traced under, nm (standard deviation). */
  readonly blurNm: number;
}

/** The walls between the domains of `states.map`: lines of share 0.5, open at borders and gaps.
 *  The share is blurred first, for geometry only: a line drawn in noise is longer than the wall. The kernel is 2G − G∗G with G a
 *  Gaussian of standard deviation b: unlike G alone it does not move a wall of curvature κ by −b²κ/2. Excess length from white
 *  noise of sd s in a field of slope g is then 2.47·s²·p_x·p_y/(16π g² b⁴) (half the mean square slope of the line), which gives b;
 *  without noise there is no blur. */
export function traceWalls(states: FrameStates, tip: Tip | null, s: WallsSettings): Wall[] {
  return trace(states, tip, s).walls;
}

/** Mean square gradient of noise under 2G − G∗G over that under G: 4 − 16/9 + 1/4. */
const KERNEL_POWER = 2.472;

export function trace(states: FrameStates, tip: Tip | null, s: WallsSettings): Tracing {
  const { rows, cols, pixel } = states.map;
  const none = { walls: [], patches: new Uint8Array(rows * cols), slopePerNm: Number.NaN, blurNm: 0 };
  if (states.levels.verdict !== "mixed" || !hasBothStates(states.map.states)) return none;

  const share = dataOf(states.share);
  const usable = new Uint8Array(rows * cols);
  for (let p = 0; p < usable.length; p++) {
    usable[p] = states.map.states[p] === NO_STATE || Number.isNaN(share[p]) ? 0 : 1;
  }
  const noise = shareNoise(states.levels);
  const step = Math.min(pixel.xNm, pixel.yNm);
  const blurred = (blurNm: number): Float32Array => {
    const out = share.slice();
    if (blurNm >= 0.3 * step) {
      const once = maskedBlur(share, usable, rows, cols, blurNm / pixel.xNm, blurNm / pixel.yNm).values;
      const twice = maskedBlur(once, usable, rows, cols, blurNm / pixel.xNm, blurNm / pixel.yNm).values;
      for (let p = 0; p < out.length; p++) out[p] = 2 * once[p] - twice[p];
    }
    for (let p = 0; p < out.length; p++) if (usable[p] === 0) out[p] = Number.NaN;
    return out;
  };

  // The blur and the slope under it depend on each other: begin with the tip's own blur.
  let blurNm = s.geometryBlurNm;
  const fixed = blurNm >= 0;
  if (!fixed) blurNm = tip === null ? 1.5 * step : tip.resolutionNm / FWHM_PER_SIGMA;
  let field = blurred(blurNm);
  for (let round = 0; round < 3 && !fixed; round++) {
    const slope = typicalSlope(field, rows, cols, pixel);
    if (!(slope > 0)) break;
    const most = 3 * (tip === null ? 3 * step : tip.resolutionNm);
    const power = KERNEL_POWER * noise.sd * noise.sd * noise.areaFactor * pixel.xNm * pixel.yNm;
    const wanted = Math.min(most, (power / (16 * Math.PI * slope * slope * s.lengthExcess)) ** 0.25);
    // a kernel nearer than this to the one wanted draws the same line
    if (Math.abs(wanted - blurNm) <= 0.05 * blurNm) break;
    blurNm = wanted;
    field = blurred(blurNm);
  }
  const patches = keepMappedDomains(field, states.map);

  const walls: Wall[] = [];
  let slopePerNm = Number.NaN;
  for (const line of traceContours(field, rows, cols, pixel, 0.5, "high")) {
    const smooth = smoothLine(line.points, line.closed, step, s.lineSmoothingPx * step);
    if (smooth === null) continue;
    walls.push({ wall: walls.length, closed: line.closed, ...smooth });
  }
  if (walls.length > 0) slopePerNm = typicalSlope(field, rows, cols, pixel);
  return { walls, patches, slopePerNm, blurNm };
}

function hasBothStates(map: Uint8Array): boolean {
  let seen = 0;
  for (let p = 0; p < map.length; p++) {
    const v = map[p];
    if (v !== NO_STATE) seen |= v === METALLIC ? 2 : 1;
    if (seen === 3) return true;
  }
  return false;
}

/** Median gradient, 1/nm, over the cells that the level line 0.5 crosses; 0 without any. */
function typicalSlope(field: Float32Array, rows: number, cols: number, pixel: PixelSize): number {
  const slopes: number[] = [];
  for (let i = 0; i + 1 < rows; i++) {
    for (let j = 0; j + 1 < cols; j++) {
      const p = i * cols + j;
      const a = field[p];
      const b = field[p + 1];
      const c = field[p + cols];
      const d = field[p + cols + 1];
      const high = (a >= 0.5 ? 1 : 0) + (b >= 0.5 ? 1 : 0) + (c >= 0.5 ? 1 : 0) + (d >= 0.5 ? 1 : 0);
      if (high === 0 || high === 4 || Number.isNaN(a + b + c + d)) continue;
      slopes.push(Math.hypot((b - a + d - c) / (2 * pixel.xNm), (c - a + d - b) / (2 * pixel.yNm)));
    }
  }
  slopes.sort((x, y) => x - y);
  return slopes.length === 0 ? 0 : slopes[slopes.length >> 1];
}
