import { findSpots, type Spot } from "./candidates.js";
import { combine, type TipTogether } from "./combine.js";
import { measureCut, type MeasuredCut } from "./measure.js";
import type { TipSettings } from "./settings.js";
import type { CutLine, TipImage, TipMeasured, WarningCode } from "./types.js";

export interface TipCandidate {
  readonly line: CutLine;
  readonly result: TipMeasured;
  /** Nothing is said against it that puts the width itself in doubt. */
  readonly sound: boolean;
}

export interface TipSearch {
  /** Sharpest first: by the width that they are below with 95 %, so that a faint feature whose width is small by luck does not lead. */
  readonly candidates: readonly TipCandidate[];
  /** One width for the sharpest of them that agree; null with fewer than two. */
  readonly together: TipTogether | null;
  /** Places that were tried. */
  readonly tried: number;
}

/** Warnings that put the width in doubt; the others are remarks. */
const DAMNING: readonly WarningCode[] = [
  "rim",
  "asymmetric",
  "tails",
  "soft-edge",
  "poor-fit",
  "uneven-plateaus",
  "short-line",
  "directions-differ",
  "coarse-sampling",
];
const MOST_TRIED = 40;
/** Half of a proposed line's length, in widths expected: a particle of two widths and a plateau beyond it. */
const HALF_LENGTH = 3.5;

/** Resolution that lines are laid out for: what the user expects, else 4 pixels. */
export const expectedNmOf = (image: TipImage, s: TipSettings): number =>
  s.expectedNm > 0 ? s.expectedNm : 4 * Math.max(image.pixel.xNm, image.pixel.yNm);

/** Width of a line where none is given. */
export const lineWidthNm = (image: TipImage, s: TipSettings): number =>
  s.widthNm > 0 ? s.widthNm : Math.max(2 * expectedNmOf(image, s), 4 * Math.max(image.pixel.xNm, image.pixel.yNm));

/** Looks through a frame for the features that show the tip best, edges and particles, and measures each as `measureTip` does. The
 *  tip's width is the lower envelope of all widths seen (nothing looks sharper than the tip lets it), with the errors in mind. */
export function findTipFeatures(image: TipImage, s: TipSettings, count: number): TipSearch {
  const expected = expectedNmOf(image, s);
  const { steep, blobs } = findSpots(image, expected, s.leastContrast, MOST_TRIED);
  const found: Found[] = [];
  const half = HALF_LENGTH * expected;
  for (const spot of [...blobs, ...steep]) {
    if (blobs.some((b) => b !== spot && disturbs(b, spot, half + expected))) continue;
    const line = lineOver(image, spot, half, lineWidthNm(image, s));
    if (line === null) continue;
    const { result, rise } = measureCut(image, line, s, { model: null, sizeNm: null });
    if (result.status === "unusable" || rise === null || result.contrastToNoise < s.leastContrast) continue;
    if (!(result.apparent.sdNm < 0.25 * result.apparent.nm)) continue;
    found.push({ line, result, rise, sound: !result.warnings.some((w) => DAMNING.includes(w.code)) });
  }
  found.sort((a, b) => Number(b.sound) - Number(a.sound) || a.result.upper95Nm - b.result.upper95Nm);
  const kept: Found[] = [];
  for (const c of found) {
    if (kept.some((k) => sameFeature(k.result, c.result, c.line.widthNm))) continue;
    kept.push(c);
  }
  const candidates = kept.slice(0, count).map(({ line, result, sound }) => ({ line, result, sound }));
  return { candidates, together: combine(kept.filter((c) => c.sound)), tried: blobs.length + steep.length };
}

/** A second particle close enough to lie in the plateau of the first. Rings of the detector round a strong one are weaker than that. */
function disturbs(other: Spot, spot: Spot, reachNm: number): boolean {
  const d = Math.hypot(other.at.xNm - spot.at.xNm, other.at.yNm - spot.at.yNm);
  return d < reachNm && d > reachNm / 3 && other.score > 0.4 * spot.score;
}

type Found = TipCandidate & { readonly rise: NonNullable<MeasuredCut["rise"]> };

/** Two cuts over one particle, or over the same piece of an edge: their pixels overlap. */
function sameFeature(a: TipMeasured, b: TipMeasured, widthNm: number): boolean {
  const reach = Math.max(widthNm, (Math.max(a.apparent.nm, b.apparent.nm) + widthNm) / 2);
  return Math.hypot(a.at.xNm - b.at.xNm, a.at.yNm - b.at.yNm) < reach;
}

/** A line through a spot, cut off at the frame's edge; null where too little of it is left. Whole nanometres, as it will be typed. */
function lineOver(image: TipImage, spot: Spot, halfNm: number, widthNm: number): CutLine | null {
  const maxX = (image.cols - 1) * image.pixel.xNm;
  const maxY = (image.rows - 1) * image.pixel.yNm;
  const room = (at: number, u: number, max: number): number =>
    u > 1e-9 ? (max - at) / u : u < -1e-9 ? at / -u : Infinity;
  const ahead = Math.min(halfNm, room(spot.at.xNm, spot.ux, maxX), room(spot.at.yNm, spot.uy, maxY));
  const behind = Math.min(halfNm, room(spot.at.xNm, -spot.ux, maxX), room(spot.at.yNm, -spot.uy, maxY));
  if (Math.min(ahead, behind) < halfNm / 2) return null;
  const point = (d: number): { xNm: number; yNm: number } => ({
    xNm: Math.round(spot.at.xNm + d * spot.ux),
    yNm: Math.round(spot.at.yNm + d * spot.uy),
  });
  return { from: point(-behind), to: point(ahead), widthNm };
}
