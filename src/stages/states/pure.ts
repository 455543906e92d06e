import type { ComplexValue } from "../../model/signal.js";
import { RISE_PER_W } from "../../model/units.js";
import { fastKink, KINK_VARIANCE } from "../../numerics/kink.js";
import { distanceToContour } from "./distance.js";
import type { Pixels } from "./pixels.js";

/** Pixels whose state is known, with the small share of the other one that the tail of the nearest wall leaves there. */
export interface PurePixels {
  /** 0 or 1 for the two states, 255 for all others. */
  readonly state: Uint8Array;
  /** Expected share of state 1. */
  readonly share: Float32Array;
  readonly count: readonly [number, number];
  /** Mean share of the wrong state that the tail of the walls puts into each. */
  readonly tail: readonly [number, number];
  /** 10–90 rise of the walls in the smoothed map, nm; NaN where there is no wall. */
  readonly apparentWidthNm: number;
}

/** Distances from a wall tried, in its apparent 10–90 widths: the farthest that leaves pixels enough. At 1.25 widths a tanh wall has
 *  0.4 % of the other state, at 0.5 widths 10 %. */
const REACHES = [1.6, 1.4, 1.25, 1.1, 1, 0.9, 0.8, 0.7, 0.6, 0.5] as const;
/** Pixels of one state that are enough to stop coming nearer to the walls. */
const ENOUGH = 600;
const ENOUGH_SHARE = 0.02;

/** The foot of a wall: this share of the other state, or this many standard deviations of the smoothed map's noise. */
const LEAST_FOOT = 0.12;
const FOOT_SIGMAS = 5;

/** What blurs the map that the pure pixels are found in, and what blurs the raw pixels they are. */
export interface WallBlur {
  /** Smoothing of the map, sd in nm. */
  readonly smoothingNm: number;
  /** The tip's response, sd in nm; 0 where it is not known. */
  readonly tipNm: number;
  /** Standard deviation of the noise of u before the smoothing, of white noise. */
  readonly noiseSd: number;
}

/** Mean width w of the walls of a smoothed map of the mixing u, as if u = ½(1 + tanh(x/w)), without tracing them: there
 *  |∇u| = 2u(1 − u)/w, averaged over the walls' length (weights |∇u| in a band about ½, by the co-area formula) so that flat spots
 *  between walls count little. What noise adds to |∇u|² is taken off. */
function tanhWidth(u: Float32Array, z: Pixels, blur: WallBlur): number {
  const { rows, cols, pixel } = z;
  // variance of a component of the gradient of white noise after a Gaussian blur: s²p²/(8πσ⁴)
  const noise2 = (2 * blur.noiseSd ** 2 * pixel.xNm * pixel.yNm) / (8 * Math.PI * blur.smoothingNm ** 4);
  let slopes = 0;
  let inverse = 0;
  for (let i = 1; i < rows - 1; i++) {
    for (let j = 1; j < cols - 1; j++) {
      const p = i * cols + j;
      const v = u[p];
      if (!(v > 0.25 && v < 0.75) || z.usable[p] === 0) continue;
      const gx = (u[p + 1] - u[p - 1]) / (2 * pixel.xNm);
      const gy = (u[p + cols] - u[p - cols]) / (2 * pixel.yNm);
      const g2 = gx * gx + gy * gy;
      if (!Number.isFinite(g2)) continue;
      slopes += Math.sqrt(g2);
      inverse += (g2 - noise2) / (2 * v * (1 - v));
    }
  }
  return inverse > 0 ? slopes / inverse : Number.NaN;
}

/** Steps of the table of a wall's tail, and how far it goes in apparent widths. */
const TABLE = 256;
const TABLE_WIDTHS = 3;

/** Share of the other state at a distance from a wall in the raw pixels: the wall as the tip sees it, without the map's smoothing. */
function tailTable(mapWidth: number, widthNm: number, blur: WallBlur): Float64Array {
  const out = new Float64Array(TABLE + 1);
  const blur2 = blur.smoothingNm ** 2 + blur.tipNm ** 2;
  const w = Math.sqrt(Math.max(mapWidth ** 2 - blur2 / KINK_VARIANCE, (0.1 * mapWidth) ** 2));
  const value = new Float64Array(4);
  for (let k = 0; k <= TABLE; k++) {
    const d = (k * TABLE_WIDTHS * widthNm) / TABLE;
    fastKink(-d, w, blur.tipNm, value);
    out[k] = value[0];
  }
  return out;
}

/** Pixels far from any wall of a smoothed map of the mixing u (NaN outside), on either side of the walls.
 *  Each state takes the farthest reach that leaves it enough pixels, and never less than half a width. */
export function purePixels(u: Float32Array, z: Pixels, blur: WallBlur): PurePixels {
  const n = u.length;
  const mapWidth = tanhWidth(u, z, blur);
  const widthNm = RISE_PER_W * mapWidth;
  const table = Number.isNaN(widthNm) ? null : tailTable(mapWidth, widthNm, blur);
  const perNm = TABLE / (TABLE_WIDTHS * widthNm);
  // distances from the foot of the walls, so that domains too small to reach ½ keep their surroundings out as well
  const mapNoise = (blur.noiseSd * Math.sqrt(z.pixel.xNm * z.pixel.yNm)) / (2 * Math.sqrt(Math.PI) * blur.smoothingNm);
  const foot = Math.min(0.4, Math.max(LEAST_FOOT, FOOT_SIGMAS * mapNoise));
  const fromMiddle = Number.isNaN(mapWidth) ? 0 : mapWidth * Math.atanh(1 - 2 * foot);
  const labels = new Uint8Array(n).fill(255);
  const distance = new Float32Array(n).fill(Infinity);
  for (const k of [0, 1] as const) {
    const level = k === 0 ? foot : 1 - foot;
    const above = new Uint8Array(n);
    for (let p = 0; p < n; p++) above[p] = z.usable[p] === 0 || Number.isNaN(u[p]) ? 255 : u[p] > level ? 1 : 0;
    const own = distanceToContour(u, level, above, k, z.rows, z.cols, z.pixel);
    for (let p = 0; p < n; p++) {
      if (above[p] !== k) continue;
      labels[p] = k;
      distance[p] = own[p] + fromMiddle;
    }
  }
  const counts = [new Float64Array(REACHES.length), new Float64Array(REACHES.length)];
  for (let p = 0; p < n; p++) {
    if (labels[p] > 1) continue;
    const d = Number.isNaN(widthNm) ? Infinity : distance[p] / widthNm;
    for (let r = REACHES.length - 1; r >= 0 && d >= REACHES[r]; r--) counts[labels[p]][r]++;
  }
  const enough = Math.max(ENOUGH, ENOUGH_SHARE * z.count);
  const reach = counts.map((c) => {
    const r = c.findIndex((v) => v >= enough);
    return REACHES[r < 0 ? REACHES.length - 1 : r] * (Number.isNaN(widthNm) ? 0 : widthNm);
  });
  const state = new Uint8Array(n).fill(255);
  const share = new Float32Array(n);
  const count: [number, number] = [0, 0];
  const tail: [number, number] = [0, 0];
  for (let p = 0; p < n; p++) {
    const k = labels[p];
    if (k > 1 || !(distance[p] >= reach[k])) continue;
    const other = table === null ? 0 : (table[Math.round(distance[p] * perNm)] ?? 0);
    state[p] = k;
    share[p] = k === 0 ? other : 1 - other;
    count[k]++;
    tail[k] += other;
  }
  tail[0] /= Math.max(1, count[0]);
  tail[1] /= Math.max(1, count[1]);
  return { state, share, count, tail, apparentWidthNm: widthNm };
}

/** Both levels from pure pixels, by least squares on z = (1 − u) z_0 + u z_1 with the expected u of each pixel; pixels further than
 *  `clip` from the levels given first are left out. */
export function levelsOf(
  z: Pixels,
  pure: PurePixels,
  before: readonly [ComplexValue, ComplexValue] | null,
  clip2: number,
): [ComplexValue, ComplexValue] {
  let [aa, ab, bb, ar, ai, br, bi] = [0, 0, 0, 0, 0, 0, 0];
  for (let p = 0; p < pure.state.length; p++) {
    if (pure.state[p] > 1) continue;
    const u = pure.share[p];
    const v = 1 - u;
    if (before !== null) {
      const dr = z.re[p] - v * before[0].re - u * before[1].re;
      const di = z.im[p] - v * before[0].im - u * before[1].im;
      if (dr * dr + di * di > clip2) continue;
    }
    aa += v * v;
    ab += u * v;
    bb += u * u;
    ar += v * z.re[p];
    ai += v * z.im[p];
    br += u * z.re[p];
    bi += u * z.im[p];
  }
  const det = aa * bb - ab * ab;
  if (!(det > 1e-9 * aa * bb) || aa === 0 || bb === 0) {
    const one: ComplexValue = { re: aa > 0 ? ar / aa : Number.NaN, im: aa > 0 ? ai / aa : Number.NaN };
    const other: ComplexValue = { re: bb > 0 ? br / bb : Number.NaN, im: bb > 0 ? bi / bb : Number.NaN };
    return [one, other];
  }
  return [
    { re: (bb * ar - ab * br) / det, im: (bb * ai - ab * bi) / det },
    { re: (aa * br - ab * ar) / det, im: (aa * bi - ab * ai) / det },
  ];
}

/** The levels with their amplitudes taken from |z| instead of the mean of z: where a fringe still turns pixels of a state, their mean is
 *  short by half the mean square of the turn, their amplitudes are not. Noise across the level (variance `across`) lengthens |z| by
 *  across/(2|z|), which is taken off. */
export function amplitudesOf(
  z: Pixels,
  pure: PurePixels,
  levels: readonly [ComplexValue, ComplexValue],
  across: readonly [number, number],
  clip2: number,
): [ComplexValue, ComplexValue] {
  const seen = [0, 0];
  const expected = [0, 0];
  for (let p = 0; p < pure.state.length; p++) {
    const k = pure.state[p];
    if (k > 1) continue;
    const u = pure.share[p];
    const er = (1 - u) * levels[0].re + u * levels[1].re;
    const ei = (1 - u) * levels[0].im + u * levels[1].im;
    const dr = z.re[p] - er;
    const di = z.im[p] - ei;
    if (dr * dr + di * di > clip2) continue;
    const m = Math.sqrt(er * er + ei * ei);
    seen[k] += Math.sqrt(z.re[p] * z.re[p] + z.im[p] * z.im[p]) - across[k] / (2 * m);
    expected[k] += m;
  }
  const scaled = (k: 0 | 1): ComplexValue => {
    const g = expected[k] > 0 ? seen[k] / expected[k] : 1;
    return { re: levels[k].re * g, im: levels[k].im * g };
  };
  return [scaled(0), scaled(1)];
}
