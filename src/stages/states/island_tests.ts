import type { Tip } from "../../model/cooldown.js";
import { METALLIC, type FrameLevels } from "../../model/signal.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import type { Pixels } from "./pixels.js";
import type { ShareCurve } from "./share_curve.js";

/** An island whose signal lies far off the line between the two levels, or far beyond them, is a particle and not a domain. */
const OFF_CHORD = 0.45;
const BEYOND = 1.5;

export function onChord(
  pixels: Int32Array,
  state: 0 | 1,
  z: Pixels,
  share: Float32Array,
  levels: FrameLevels,
  curve: ShareCurve,
): boolean {
  const { insulating, metallic } = levels;
  const dRe = metallic.re - insulating.re;
  const dIm = metallic.im - insulating.im;
  const d2 = dRe * dRe + dIm * dIm;
  let [n, re, im, u] = [0, 0, 0, 0];
  for (const p of pixels) {
    n++;
    re += z.re[p] - insulating.re;
    im += z.im[p] - insulating.im;
    u += share[p];
  }
  const off = Math.abs((im * dRe - re * dIm) / n / d2);
  const noise = Math.max(curve.sdInsulating, curve.sdMetallic) / Math.sqrt(n);
  const reach = state === METALLIC ? u / n : 1 - u / n;
  return (!z.hasPhase || off < OFF_CHORD + 3 * noise) && reach < BEYOND + 3 * noise;
}

/** Rows over which an island may still be a scar, and how far the rows beside it must lag behind what the tip's blur would carry over. */
const SCAR_ROWS = 2;
const SCAR_LAG = 0.6;

/** A scar that the cleaning missed: a run along one or two rows whose neighbours above and below know nothing of it, although the tip
 *  would spread anything on the sample over them. */
export function isScar(pixels: Int32Array, state: 0 | 1, z: Pixels, share: Float32Array, tip: Tip | null): boolean {
  const { rows, cols, pixel } = z;
  const inside = new Set(pixels);
  let first = rows;
  let last = -1;
  for (const p of pixels) {
    const i = Math.floor(p / cols);
    first = Math.min(first, i);
    last = Math.max(last, i);
  }
  if (last - first + 1 > SCAR_ROWS) return false;
  const sigmaNm = tip === null ? pixel.yNm : tip.resolutionNm / FWHM_PER_SIGMA;
  const departure = (p: number): number => (state === METALLIC ? share[p] : 1 - share[p]);
  let [inner, innerN, outer, outerN] = [0, 0, 0, 0];
  for (const p of pixels) {
    inner += departure(p);
    innerN++;
    for (const q of [p - cols, p + cols]) {
      if (q < 0 || q >= share.length || inside.has(q) || z.usable[q] === 0) continue;
      outer += departure(q);
      outerN++;
    }
  }
  if (outerN === 0) return false;
  const carried = Math.exp(-0.5 * (pixel.yNm / sigmaNm) ** 2);
  return outer / outerN < SCAR_LAG * carried * (inner / innerN);
}
