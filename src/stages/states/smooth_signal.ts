import type { Tip } from "../../model/cooldown.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import type { Pixels } from "./pixels.js";

const SMOOTHING_PX = 1.3;

export interface Smoothing {
  readonly xPx: number;
  readonly yPx: number;
}

/** For finding the states: one tip sigma, 1 to 2 pixels. */
export function smoothingOf(z: Pixels, tip: Tip | null): Smoothing {
  const sigmaNm =
    tip === null ? SMOOTHING_PX * Math.sqrt(z.pixel.xNm * z.pixel.yNm) : tip.resolutionNm / FWHM_PER_SIGMA;
  const within = (px: number): number => Math.min(2, Math.max(1, px));
  return { xPx: within(sigmaNm / z.pixel.xNm), yPx: within(sigmaNm / z.pixel.yNm) };
}
