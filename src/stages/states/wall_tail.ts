import { fastKink, KINK_VARIANCE } from "../../numerics/kink.js";
import type { Cells } from "./cells.js";

/** What blurs the map that the pure cells are found in, and what blurs the raw pixels they hold. */
export interface WallBlur {
  /** Smoothing of the map, sd in nm. */
  readonly smoothingNm: number;
  /** The tip's response, sd in nm; 0 where it is not known. */
  readonly tipNm: number;
  /** Standard deviation of white noise left in the map. */
  readonly mapNoise: number;
}

/** Mean width w of the walls of a smoothed map of the mixing u, as if u = ½(1 + tanh(x/w)), without tracing them: there
 *  |∇u| = 2u(1 − u)/w, averaged over the walls' length (weights |∇u| in a band about ½, by the co-area formula) so that flat spots
 *  between walls count little. What noise adds to |∇u|² is taken off, and so is the width that differences over two cells add: they are
 *  those of a map blurred by a box of two cells more. NaN without walls. */
export function meanWidth(u: Float32Array, cells: Cells, blur: WallBlur): number {
  const { rows, cols, pixel, count } = cells;
  const noise2 = differenceVariance(blur, pixel.xNm) + differenceVariance(blur, pixel.yNm);
  const perX = 1 / (2 * pixel.xNm);
  const perY = 1 / (2 * pixel.yNm);
  let slopes = 0;
  let inverse = 0;
  for (let i = 1; i < rows - 1; i++) {
    for (let j = 1, p = i * cols + 1; j < cols - 1; j++, p++) {
      const v = u[p];
      if (!(v > 0.25 && v < 0.75) || count[p] === 0) continue;
      if (count[p - 1] === 0 || count[p + 1] === 0 || count[p - cols] === 0 || count[p + cols] === 0) continue;
      const gx = (u[p + 1] - u[p - 1]) * perX;
      const gy = (u[p + cols] - u[p - cols]) * perY;
      const g2 = gx * gx + gy * gy;
      slopes += Math.sqrt(g2);
      inverse += (g2 - noise2) / (2 * v * (1 - v));
    }
  }
  if (!(inverse > 0)) return Number.NaN;
  const w = slopes / inverse;
  // a box of 2h has the variance h²/3; of a wall askew it is cos⁴ and sin⁴ of it along the axes, ¾ together on average
  const box2 = (0.375 * (pixel.xNm ** 2 + pixel.yNm ** 2)) / 3;
  return Math.sqrt(Math.max(w * w - box2 / KINK_VARIANCE, (0.5 * w) ** 2));
}

/** Variance of a central difference over two steps h of white noise after a Gaussian blur: its covariance falls off as exp(−d²/4σ²). */
function differenceVariance(blur: WallBlur, h: number): number {
  return (blur.mapNoise ** 2 * (1 - Math.exp(-((h / blur.smoothingNm) ** 2)))) / (2 * h * h);
}

/** Steps of the table of a wall's tail, and how far it goes in apparent widths. */
export const TABLE_STEPS = 256;
export const TABLE_WIDTHS = 3;

/** Share of the other state at a distance from a wall in the raw pixels: the wall as the tip sees it, without the map's smoothing. */
export function tailTable(mapWidth: number, widthNm: number, blur: WallBlur): Float64Array {
  const out = new Float64Array(TABLE_STEPS + 1);
  const blur2 = blur.smoothingNm ** 2 + blur.tipNm ** 2;
  const w = Math.sqrt(Math.max(mapWidth ** 2 - blur2 / KINK_VARIANCE, (0.1 * mapWidth) ** 2));
  const value = new Float64Array(4);
  for (let k = 0; k <= TABLE_STEPS; k++) {
    const d = (k * TABLE_WIDTHS * widthNm) / TABLE_STEPS;
    fastKink(-d, w, blur.tipNm, value);
    out[k] = value[0];
  }
  return out;
}
