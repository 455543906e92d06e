import type { Branch } from "../model/cooldown.js";
import { FWHM_PER_SIGMA } from "../model/units.js";
import { coverRow, type Area } from "./debris.js";
import { distanceMap } from "./distance.js";
import { domainField, thresholdOf } from "./domain_field.js";
import type { Field } from "./lattice_field.js";
import { findLevelSet, type FieldGrid, type LevelSet } from "./level_set.js";
import type { CooldownSpec, Particle } from "./spec.js";
import { profileTable, reachOf } from "./wall_profile.js";

/** One frame before anything of the instrument but its tip. Row-major [rows, cols]. */
export interface NearField {
  /** The complex signal as the tip sees it, at the pixels' centres. */
  readonly re: Float64Array;
  readonly im: Float64Array;
  /** Signed distance of each pixel's centre from the nearest wall, metallic positive, nm; ±∞ where no wall lies in reach. */
  readonly signedDistanceNm: Float32Array;
  /** 1 metallic, 0 insulating: the sharp map at the pixels' centres. */
  readonly states: Uint8Array;
  /** The walls in sample coordinates. */
  readonly walls: LevelSet;
}

/** Where a frame lies: sample coordinates of its pixel (0, 0). */
export interface Place {
  readonly xNm: number;
  readonly yNm: number;
}

/** The sample's area that a frame shows, edge pixels' centres included. */
export function areaOf(spec: CooldownSpec, at: Place): Area {
  return {
    xFromNm: at.xNm,
    xToNm: at.xNm + (spec.cols - 1) * spec.pixel.xNm,
    yFromNm: at.yNm,
    yToNm: at.yNm + (spec.rows - 1) * spec.pixel.yNm,
  };
}

function gridOf(field: Field, threshold: number, spec: CooldownSpec, area: Area, marginNm: number): FieldGrid {
  // A sixteenth of the field's scale: walls true to 1e-4 of the scale (see findLevelSet).
  const cell = Math.min(12, spec.domains.scaleNm / 16);
  const x0 = area.xFromNm - marginNm - 2 * cell;
  const y0 = area.yFromNm - marginNm - 2 * cell;
  const nx = Math.ceil((area.xToNm + marginNm + 2 * cell - x0) / cell) + 1;
  const ny = Math.ceil((area.yToNm + marginNm + 2 * cell - y0) / cell) + 1;
  const values = new Float64Array(nx * ny);
  const sample = field.sampler(x0, cell, nx);
  for (let i = 0; i < ny; i++) sample(y0 + i * cell, values.subarray(i * nx, (i + 1) * nx));
  for (let k = 0; k < values.length; k++) values[k] -= threshold;
  return { values, nx, ny, x0, y0, dx: cell, dy: cell };
}

/** Largest step of the finer grid in standard deviations of the tip, and width of the Gaussian taken out of it in steps. */
const STEP = 0.4;
const SMOOTH = 0.6;

/** Weights of a Gaussian at whole steps out to 5.5 standard deviations, adding to 1. */
function gaussianTaps(sigmaNm: number, stepNm: number): Float64Array {
  const reach = sigmaNm > 0 ? Math.ceil((5.5 * sigmaNm) / stepNm) : 0;
  const taps = Float64Array.from({ length: 2 * reach + 1 }, (_, k) =>
    reach === 0 ? 1 : Math.exp(-0.5 * (((k - reach) * stepNm) / sigmaNm) ** 2),
  );
  const total = taps.reduce((a, b) => a + b, 0);
  return taps.map((t) => t / total);
}

/** The near-field signal of one frame as the tip sees it, with the truth behind it.
 *
 *  The field is evaluated at the frame's own shifted coordinates; nothing rendered is ever interpolated. Each pixel is the Gaussian
 *  sum over a finer grid (step ≤ 0.4 of the tip's standard deviation σ) of the complex profile at the exact signed distance. That grid
 *  alone would be too coarse for a sharp wall, so the Gaussian is split: one of 0.6 steps is applied to the profile along the normal,
 *  where it is exact but for the wall's curvature κ (a shift of (0.6 step)²κ/2, about 0.02 nm at a radius of 200 nm and a 30 nm tip), and the rest, of variance
 *  σ² − (0.6 step)², is summed. A straight sharp wall gives the error function to 3e-4 of the step. */
export function nearField(
  spec: CooldownSpec,
  branch: Branch,
  cycle: number,
  temperatureK: number,
  at: Place,
  particles: readonly Particle[],
): NearField {
  const { rows, cols, pixel } = spec;
  const sigma = spec.tip.resolutionNm / FWHM_PER_SIGMA;
  const mx = sigma > 0 ? Math.max(1, Math.ceil(pixel.xNm / (STEP * sigma))) : 1;
  const my = sigma > 0 ? Math.max(1, Math.ceil(pixel.yNm / (STEP * sigma))) : 1;
  const hx = pixel.xNm / mx;
  const hy = pixel.yNm / my;
  const smooth = sigma > 0 ? SMOOTH * Math.max(hx, hy) : 0;
  const rest = Math.sqrt(sigma * sigma - smooth * smooth);
  const kx = gaussianTaps(rest, hx);
  const ky = gaussianTaps(rest, hy);
  const rx = (kx.length - 1) / 2;
  const ry = (ky.length - 1) / 2;

  const field = domainField(spec, branch, cycle);
  const threshold = thresholdOf(spec, branch, temperatureK);
  const reach = reachOf(spec, temperatureK) + 6 * smooth;
  const grid = gridOf(field, threshold, spec, areaOf(spec, at), reach + Math.max(rx * hx, ry * hy));
  const walls = findLevelSet(grid);
  const map = distanceMap(grid, walls);
  const table = profileTable(spec, temperatureK, smooth);

  const fineCols = (cols - 1) * mx + 1 + 2 * rx;
  const fineRows = (rows - 1) * my + 1 + 2 * ry;
  const fx0 = at.xNm - rx * hx;
  const fy0 = at.yNm - ry * hy;
  const sample = field.sampler(fx0, hx, fineCols);
  const f = new Float64Array(fineCols);
  const d = new Float64Array(fineCols);
  const zr = new Float64Array(fineCols);
  const zi = new Float64Array(fineCols);
  const pixelD = new Float64Array(cols);
  const blurRe = new Float64Array(fineRows * cols);
  const blurIm = new Float64Array(fineRows * cols);
  const signedDistanceNm = new Float32Array(rows * cols);
  const states = new Uint8Array(rows * cols);
  const last = table.re.length - 1;

  for (let i = 0; i < fineRows; i++) {
    const y = fy0 + i * hy;
    sample(y, f);
    map.row(y, fx0, hx, fineCols, reach, d);
    for (let k = 0; k < fineCols; k++) {
      const signed = f[k] > threshold ? d[k] : -d[k];
      const t = (signed - table.firstNm) / table.stepNm;
      if (t <= 0) {
        zr[k] = table.re[0];
        zi[k] = table.im[0];
      } else if (t >= last) {
        zr[k] = table.re[last];
        zi[k] = table.im[last];
      } else {
        const at0 = Math.floor(t);
        const w = t - at0;
        zr[k] = table.re[at0] + w * (table.re[at0 + 1] - table.re[at0]);
        zi[k] = table.im[at0] + w * (table.im[at0 + 1] - table.im[at0]);
      }
    }
    coverRow(particles, y, fx0, hx, fineCols, smooth, zr, zi);
    for (let j = 0; j < cols; j++) {
      const from = j * mx;
      const to = from + 2 * rx;
      let sr = kx[rx] * zr[from + rx];
      let si = kx[rx] * zi[from + rx];
      for (let t = 0; t < rx; t++) {
        sr += kx[t] * (zr[from + t] + zr[to - t]);
        si += kx[t] * (zi[from + t] + zi[to - t]);
      }
      blurRe[i * cols + j] = sr;
      blurIm[i * cols + j] = si;
    }
    if (i >= ry && (i - ry) % my === 0 && (i - ry) / my < rows) {
      const row = (i - ry) / my;
      map.row(y, at.xNm, pixel.xNm, cols, Number.POSITIVE_INFINITY, pixelD);
      for (let j = 0; j < cols; j++) {
        const metallic = f[rx + j * mx] > threshold;
        states[row * cols + j] = metallic ? 1 : 0;
        signedDistanceNm[row * cols + j] = metallic ? pixelD[j] : -pixelD[j];
      }
    }
  }
  const re = new Float64Array(rows * cols);
  const im = new Float64Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    for (let t = 0; t < ky.length; t++) {
      const from = (i * my + t) * cols;
      const w = ky[t];
      for (let j = 0; j < cols; j++) {
        re[i * cols + j] += w * blurRe[from + j];
        im[i * cols + j] += w * blurIm[from + j];
      }
    }
  }
  return { re, im, signedDistanceNm, states, walls };
}
