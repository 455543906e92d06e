import { wrapAngle } from "../../numerics/quantile.js";
import type { CutLine, Place, TipImage } from "./types.js";

/** The line's own axes: `along` from `from` to `to`, `across` a quarter turn on; unit vectors in (x, y) nm. */
export interface LineFrame {
  readonly middle: Place;
  readonly lengthNm: number;
  readonly ux: number;
  readonly uy: number;
}

export function lineFrame(line: CutLine): LineFrame {
  const dx = line.to.xNm - line.from.xNm;
  const dy = line.to.yNm - line.from.yNm;
  const lengthNm = Math.hypot(dx, dy);
  return {
    middle: { xNm: (line.from.xNm + line.to.xNm) / 2, yNm: (line.from.yNm + line.to.yNm) / 2 },
    lengthNm,
    ux: lengthNm > 0 ? dx / lengthNm : 1,
    uy: lengthNm > 0 ? dy / lengthNm : 0,
  };
}

/** Raw pixels beside a line: nothing is resampled, each keeps its own exact place. */
export interface CutPixels {
  readonly n: number;
  /** Place along the line and across it from the line's middle, nm. */
  readonly s: Float64Array;
  readonly t: Float64Array;
  /** Row-major index of each in the frame. */
  readonly index: Int32Array;
  /** One array a component; an angle is given from the circular mean of the cut, in (−π, π]. */
  readonly y: readonly Float64Array[];
  /** 1 over the standard deviation of the pixel noise. */
  readonly inverseSd: readonly Float64Array[];
}

/** The pixels within half a length and half a width of the line's middle; with `crossed`, also those of the line turned by 90°. */
export function pixelsAlong(image: TipImage, frame: LineFrame, widthNm: number, crossed: boolean): CutPixels {
  const { rows, cols, pixel } = image;
  const half = frame.lengthNm / 2;
  const side = widthNm / 2;
  const reach = Math.hypot(half, side);
  const i0 = Math.max(0, Math.ceil((frame.middle.yNm - reach) / pixel.yNm));
  const i1 = Math.min(rows - 1, Math.floor((frame.middle.yNm + reach) / pixel.yNm));
  const j0 = Math.max(0, Math.ceil((frame.middle.xNm - reach) / pixel.xNm));
  const j1 = Math.min(cols - 1, Math.floor((frame.middle.xNm + reach) / pixel.xNm));
  const s: number[] = [];
  const t: number[] = [];
  const index: number[] = [];
  const eps = 1e-6;
  for (let i = i0; i <= i1; i++) {
    for (let j = j0; j <= j1; j++) {
      const p = i * cols + j;
      const rx = j * pixel.xNm - frame.middle.xNm;
      const ry = i * pixel.yNm - frame.middle.yNm;
      const a = rx * frame.ux + ry * frame.uy;
      const b = -rx * frame.uy + ry * frame.ux;
      const inside = Math.abs(a) <= half + eps && Math.abs(b) <= side + eps;
      const insideCross = crossed && Math.abs(b) <= half + eps && Math.abs(a) <= side + eps;
      if (!inside && !insideCross) continue;
      if (image.components.some((c) => !Number.isFinite(c[p]))) continue;
      if (image.amplitude !== null && !(image.amplitude[p] > 0)) continue;
      s.push(a);
      t.push(b);
      index.push(p);
    }
  }
  const n = index.length;
  const y = image.components.map((c) => Float64Array.from(index, (p) => c[p]));
  if (image.isAngle) for (const values of y) turnToMean(values);
  const inverseSd = image.noise.map((noise) => {
    const sd = noise.sd;
    return Float64Array.from(index, (p) => (image.amplitude === null ? 1 : localAmplitude(image, p)) / sd);
  });
  return { n, s: Float64Array.from(s), t: Float64Array.from(t), index: Int32Array.from(index), y, inverseSd };
}

function turnToMean(values: Float64Array): void {
  let c = 0;
  let s = 0;
  for (const a of values) {
    c += Math.cos(a);
    s += Math.sin(a);
  }
  const mean = Math.atan2(s, c);
  for (let k = 0; k < values.length; k++) values[k] = wrapAngle(values[k] - mean);
}

/** Mean amplitude of the 3 × 3 pixels: a pixel's own would tie its weight to its noise. */
function localAmplitude(image: TipImage, p: number): number {
  const a = image.amplitude as Float32Array;
  const row = Math.floor(p / image.cols);
  const col = p - row * image.cols;
  let sum = 0;
  let n = 0;
  for (let i = Math.max(0, row - 1); i <= Math.min(image.rows - 1, row + 1); i++) {
    for (let j = Math.max(0, col - 1); j <= Math.min(image.cols - 1, col + 1); j++) {
      const v = a[i * image.cols + j];
      if (!(v > 0)) continue;
      sum += v;
      n++;
    }
  }
  return sum / n;
}

/** A place on the line's axes back in the frame, nm. */
export const placeOf = (f: LineFrame, s: number, t: number): Place => ({
  xNm: f.middle.xNm + s * f.ux - t * f.uy,
  yNm: f.middle.yNm + s * f.uy + t * f.ux,
});
