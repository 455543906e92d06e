import { maskedBlur } from "../../raster/masked_blur.js";
import type { Place, TipImage } from "./types.js";

/** A place where something sharp may be, and the direction (unit vector, nm) in which the signal changes fastest. */
export interface Spot {
  readonly at: Place;
  readonly ux: number;
  readonly uy: number;
  /** Response of the detector over its noise. */
  readonly score: number;
}

/** Blur of the detectors in pixels: enough against white noise, not enough to join a particle with its surroundings. */
const FINE_PX = 1;
const WIDE_PX = 2.5;
/** Standard deviation of white noise 1 after the blur and a slope (1/(√(8π) σ²)), and after the difference of both blurs. */
const SLOPE_NOISE = 1 / (Math.sqrt(8 * Math.PI) * FINE_PX ** 2);
const BLOB_NOISE = 0.24;

/** Local maxima of two detectors, strongest first: the steepest places, and the spots that stand out most from their surroundings.
 *  Angles are taken as they are: a channel whose values jump by 2π inside the frame should be turned first. */
export function findSpots(
  image: TipImage,
  apartNm: number,
  leastScore: number,
  most: number,
): { readonly steep: Spot[]; readonly blobs: Spot[] } {
  const { rows, cols, pixel } = image;
  const n = rows * cols;
  const slope2 = new Float64Array(n);
  const blob2 = new Float64Array(n);
  const fine: Float32Array[] = [];
  image.components.forEach((c, k) => {
    const scale = noiseScale(image, k);
    const { values } = maskedBlur(c, null, rows, cols, FINE_PX, FINE_PX);
    const wide = maskedBlur(c, null, rows, cols, WIDE_PX, WIDE_PX).values;
    fine.push(values);
    for (let i = 1; i < rows - 1; i++) {
      for (let j = 1; j < cols - 1; j++) {
        const p = i * cols + j;
        if (Number.isNaN(c[p])) continue;
        const gx = (values[p + 1] - values[p - 1]) / 2;
        const gy = (values[p + cols] - values[p - cols]) / 2;
        const s = scale(p);
        slope2[p] += (gx * gx + gy * gy) / (s * SLOPE_NOISE) ** 2;
        blob2[p] += ((values[p] - wide[p]) / (s * BLOB_NOISE)) ** 2;
      }
    }
  });
  const direction = (p: number): [number, number] => {
    // the direction of steepest change of all components together: the larger eigenvector of Σ g gᵀ
    let xx = 0;
    let xy = 0;
    let yy = 0;
    fine.forEach((v, k) => {
      const s = noiseScale(image, k)(p);
      const gx = (v[p + 1] - v[p - 1]) / (2 * pixel.xNm * s);
      const gy = (v[p + cols] - v[p - cols]) / (2 * pixel.yNm * s);
      xx += gx * gx;
      xy += gx * gy;
      yy += gy * gy;
    });
    const a = 0.5 * Math.atan2(2 * xy, xx - yy);
    return [Math.cos(a), Math.sin(a)];
  };
  const across = (p: number): [number, number] => {
    // the direction of the strongest bend, along x where the spot is round
    let xx = 0;
    let xy = 0;
    let yy = 0;
    fine.forEach((v, k) => {
      const s = noiseScale(image, k)(p) * Math.sign(v[p] - wideMean(v, p, cols));
      xx += (v[p + 1] - 2 * v[p] + v[p - 1]) / (pixel.xNm * pixel.xNm * s);
      yy += (v[p + cols] - 2 * v[p] + v[p - cols]) / (pixel.yNm * pixel.yNm * s);
      xy += (v[p + cols + 1] - v[p + cols - 1] - v[p - cols + 1] + v[p - cols - 1]) / (4 * pixel.xNm * pixel.yNm * s);
    });
    const mean = (xx + yy) / 2;
    const part = Math.hypot((xx - yy) / 2, xy);
    if (part < 0.25 * Math.abs(mean)) return [1, 0];
    // both bends are negative at a peak: the stronger one is the lower
    const a = 0.5 * Math.atan2(-2 * xy, yy - xx);
    return [Math.cos(a), Math.sin(a)];
  };
  const pick = (score2: Float64Array, toward: (p: number) => [number, number]): Spot[] =>
    maxima(score2, rows, cols, leastScore * leastScore)
      .map((p) => {
        const [ux, uy] = toward(p);
        const at = { xNm: (p % cols) * pixel.xNm, yNm: Math.floor(p / cols) * pixel.yNm };
        return { at, ux, uy, score: Math.sqrt(score2[p]) };
      })
      .sort((a, b) => b.score - a.score)
      .filter(apart(apartNm))
      .slice(0, most);
  return { steep: pick(slope2, direction), blobs: pick(blob2, across) };
}

/** Noise of a component at a pixel. */
function noiseScale(image: TipImage, component: number): (p: number) => number {
  const sd = image.noise[component].sd;
  const a = image.amplitude;
  return a === null ? () => sd : (p) => sd / Math.max(a[p], 1e-30);
}

const wideMean = (v: Float32Array, p: number, cols: number): number =>
  (v[p - cols - 1] + v[p - cols + 1] + v[p + cols - 1] + v[p + cols + 1]) / 4;

function maxima(score: Float64Array, rows: number, cols: number, least: number): number[] {
  const out: number[] = [];
  for (let i = 2; i < rows - 2; i++) {
    for (let j = 2; j < cols - 2; j++) {
      const p = i * cols + j;
      const v = score[p];
      if (!(v >= least)) continue;
      if (
        v > score[p - 1] &&
        v >= score[p + 1] &&
        v > score[p - cols] &&
        v >= score[p + cols] &&
        v > score[p - cols - 1] &&
        v >= score[p + cols + 1] &&
        v > score[p - cols + 1] &&
        v >= score[p + cols - 1]
      )
        out.push(p);
    }
  }
  return out;
}

/** Keeps a spot only where no better one lies nearer; for lists sorted best first. */
function apart(nm: number): (s: Spot) => boolean {
  const kept: Spot[] = [];
  return (s) => {
    if (kept.some((k) => Math.hypot(k.at.xNm - s.at.xNm, k.at.yNm - s.at.yNm) < nm)) return false;
    kept.push(s);
    return true;
  };
}
