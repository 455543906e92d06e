import { METALLIC, NO_STATE } from "../../model/signal.js";
import type { PixelSize } from "../../model/raster.js";
import { offsetVariance } from "./row_smoother.js";

/** Band of u about ½ in which the length and steepness of the walls are summed. */
const BAND = 0.15;
/** Two-sided 95 % of a normal. */
const Z95 = 1.959963984540054;
/** How wrong the correction for curvature may be, as a share of itself: it is the first term of a series in σ²κ². */
const CURVATURE_ERROR = 0.25;
/** Systematic error of a contour's place as a share of the blur: walls that meet, terms beyond the first in the curvature. */
const PLACE_ERROR = 0.012;
/** A share of the pixels is asked for, not of the area: whole pixels on a contour depart from the area by this, times the root of their
 *  number (measured on random contours). */
const WHOLE_PIXEL_SD = 0.24;

export interface FractionInput {
  readonly rows: number;
  readonly cols: number;
  readonly pixel: PixelSize;
  /** INSULATING, METALLIC or NO_STATE, islands cleared. */
  readonly states: Uint8Array;
  /** Smoothed share of the metallic signal; NaN where unusable. */
  readonly u: Float32Array;
  /** Blur of the map by tip and smoothing together, sd in nm. */
  readonly blurSigmaNm: number;
  /** Its relative standard deviation from the tip's. */
  readonly blurRelativeSd: number;
  /** Standard deviation of the pixel noise of u, before the smoothing, at u = ½. */
  readonly noiseSd: number;
  /** Pixels per independent pixel of that noise. */
  readonly perIndependent: number;
  /** Smoothing of the map, sd in nm. */
  readonly smoothingNm: number;
  readonly thresholdSd: number;
  /** Errors left in the gains of the rows (of the logarithm), and d(threshold)/d(log gain) in units of u. */
  readonly rowSd: ArrayLike<number>;
  readonly rowWalkSd: number;
  readonly rowWhiteSd: number;
  readonly perLogGain: number;
  /** Areas of the spots that hide the sample (debris, scars), pixels. */
  readonly hiddenPx: readonly number[];
}

/** Metallic fraction of the usable pixels of a frame with both states, with its 95 % interval for this field of view.
 *
 *  Pixels crossed by the contour u = ½ count with the share of their area on the metallic side (a straight contour through the pixel,
 *  from the local value and slope). A Gaussian blur σ moves a contour of curvature κ by −σ²κ/2 towards its centre of curvature, so
 *  that the area changes by −(σ²/2)∮κ ds = −πσ² (components − holes) whatever the sizes: that is put back, with ∮κ ds/2π counted on the
 *  2 × 2 neighbourhoods inside the frame (corners of +¼ and −¼ turn; Gray 1971), so that open contours count with what they turn.
 *  Variance: threshold × dA/du; pixel noise along the contours; what is left of the row gains; the curvature's correction; sub-pixel
 *  errors; what debris and scars hide. dA/du = ∫ ds/|∇u| is summed over a band about ½ (co-area formula). The interval holds the fraction of the whole
 *  measured field, hidden spots included, and says nothing of other fields. */
export function mixedFraction(f: FractionInput): { value: number; low: number; high: number } {
  const { rows, cols, pixel, states, u } = f;
  const pixelArea = pixel.xNm * pixel.yNm;
  let [usable, covered, crossed] = [0, 0, 0];
  let [slope1, slope2] = [0, 0];
  const rowSlope = new Float64Array(rows);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      const state = states[p];
      if (state === NO_STATE) continue;
      usable++;
      const metallic = state === METALLIC;
      const v = u[p] - 0.5;
      let cover = metallic ? 1 : 0;
      // where an island was cleared the map, not the contour, has the word
      const crossing = Math.abs(v) < 0.5 && v > 0 === metallic && touchesOther(states, p, i, j, rows, cols);
      if (crossing || Math.abs(v) < BAND) {
        const gx = difference(u, states, p, j > 0 ? -1 : 0, j < cols - 1 ? 1 : 0);
        const gy = difference(u, states, p, i > 0 ? -cols : 0, i < rows - 1 ? cols : 0);
        const perPx = Math.sqrt(gx * gx + gy * gy);
        if (perPx > 0 && crossing) {
          cover = coverage(v, gx, gy);
          if (cover > 0 && cover < 1) crossed++;
        }
        if (Math.abs(v) < BAND && perPx > 0) {
          const g = Math.sqrt((gx / pixel.xNm) ** 2 + (gy / pixel.yNm) ** 2);
          // flat spots near ½ would count without bound: the walls are no wider than the frame
          const inverse = 1 / Math.max(g, 1e-3 / Math.max(pixel.xNm, pixel.yNm));
          slope1 += pixelArea / (2 * BAND);
          slope2 += (pixelArea / (2 * BAND)) * inverse;
          rowSlope[i] += pixelArea / (2 * BAND);
        }
      }
      covered += cover;
    }
  }
  const area = usable * pixelArea;
  const turns = turning(states, rows, cols);
  const curvature = Math.PI * f.blurSigmaNm ** 2 * turns;
  const threshold = slope1 * f.thresholdSd;
  // noise of density s²p² smoothed by σ, integrated along a line: s²p²/(2√π σ) a unit length
  const density = f.noiseSd ** 2 * pixelArea * f.perIndependent;
  const noise2 = (slope2 * density) / (2 * Math.sqrt(Math.PI) * Math.max(f.smoothingNm, 0.3 * pixel.xNm));
  const c = rowSlope.map((v) => v * f.perLogGain);
  const rows2 = offsetVariance(c, f.rowSd, f.rowWalkSd, f.rowWhiteSd);
  const curvatureSd =
    Math.abs(curvature) * Math.hypot(CURVATURE_ERROR, 2 * f.blurRelativeSd) + Math.PI * f.blurSigmaNm ** 2 * 0.3;
  const subpixel2 = crossed * (WHOLE_PIXEL_SD * pixelArea) ** 2;
  const lengthNm = slope2 > 0 ? (slope1 * slope1) / slope2 : 0;
  const place = lengthNm * PLACE_ERROR * f.blurSigmaNm;
  const value = clamp(covered / usable + curvature / area);
  const seen2 = (threshold ** 2 + noise2 + rows2 + curvatureSd ** 2 + subpixel2 + place ** 2) / area ** 2;
  const sd = Math.sqrt(seen2 + hiddenVariance(f.hiddenPx, usable, value));
  return { value, low: clamp(value - Z95 * sd), high: clamp(value + Z95 * sd) };
}

/** What lies under a spot is all of one state or all of the other, with the chances of the rest of the field: spots are no larger than
 *  domains. Every spot adds (its share of the field)²·f(1 − f). */
function hiddenVariance(hiddenPx: readonly number[], usable: number, fraction: number): number {
  const field = hiddenPx.reduce((a, b) => a + b, usable);
  return hiddenPx.reduce((a, b) => a + (b / field) ** 2, 0) * fraction * (1 - fraction);
}

const clamp = (v: number): number => Math.min(1, Math.max(0, v));

/** Central difference a pixel, one-sided at borders and gaps; 0 where there is no neighbour. */
function difference(u: Float32Array, states: Uint8Array, p: number, back: number, forth: number): number {
  const a = back !== 0 && states[p + back] !== NO_STATE ? 1 : 0;
  const b = forth !== 0 && states[p + forth] !== NO_STATE ? 1 : 0;
  if (a + b === 0) return 0;
  return (u[p + b * forth] - u[p + a * back]) / (a + b);
}

function touchesOther(states: Uint8Array, p: number, i: number, j: number, rows: number, cols: number): boolean {
  const own = states[p];
  const right = Math.min(cols - 1, j + 1) - j;
  for (let di = Math.max(-1, -i); di <= 1 && i + di < rows; di++) {
    const row = p + di * cols;
    for (let q = row + Math.max(-1, -j); q <= row + right; q++) {
      if (states[q] !== own && states[q] !== NO_STATE) return true;
    }
  }
  return false;
}

/** Share of a unit square on the positive side of v + gx·x + gy·y = 0, the origin at its centre. */
export function coverage(v: number, gx: number, gy: number): number {
  const a = Math.abs(gx);
  const b = Math.abs(gy);
  const large = Math.max(a, b);
  const small = Math.min(a, b);
  if (large === 0) return v > 0 ? 1 : v < 0 ? 0 : 0.5;
  const reach = 0.5 * (large + small);
  const d = Math.abs(v);
  let part: number;
  if (d >= reach) part = 0;
  else if (d <= 0.5 * (large - small)) part = 0.5 - d / large;
  else part = (reach - d) ** 2 / (2 * large * small);
  return v > 0 ? 1 - part : part;
}

/** ∮κ ds/2π of the contours between the states, inside the frame and away from gaps, positive round metallic domains: by counting
 *  2 × 2 neighbourhoods with one (+¼) and three (−¼) metallic pixels. Diagonal pairs are joined (8 neighbours): −½. */
export function turning(states: Uint8Array, rows: number, cols: number): number {
  let quarters = 0;
  for (let i = 0; i + 1 < rows; i++) {
    for (let j = 0; j + 1 < cols; j++) {
      const p = i * cols + j;
      const a = states[p];
      const b = states[p + 1];
      const c = states[p + cols];
      const d = states[p + cols + 1];
      const sum = a + b + c + d;
      // all alike, or one without a state
      if (sum === 0 || sum >= 4) continue;
      if (sum === 1) quarters++;
      else if (sum === 3) quarters--;
      else if (sum === 2 && a === d) quarters -= 2;
    }
  }
  return quarters / 4;
}
