import sharp from "sharp";
import type { ChannelName } from "../model/cooldown.js";
import type { Preview } from "../model/pictures.js";
import { dataOf } from "../model/raster.js";
import type { CleanFrame, FrameLevels } from "../model/signal.js";
import { dropNaNInPlace, selectInPlace } from "../numerics/quantile.js";
import { correctPixels, readPixels, type LevelFit } from "../stages/states/index.js";

/** A preview's longer side has at most this many pixels. */
const MOST_PX = 256;

/** Values averaged over boxes of stepY × stepX pixels, row-major; NaN where less than half of a box was measured. */
export interface Averaged {
  readonly rows: number;
  readonly cols: number;
  readonly stepX: number;
  readonly stepY: number;
  readonly values: Float32Array;
}

/** Every channel of one frame made small, as the analysis saw it: rows corrected, gain and phase reference taken off; what it left out as
 *  debris stays visible. */
export async function makePreviews(
  clean: CleanFrame,
  fit: Pick<LevelFit, "correction">,
  levels: FrameLevels,
): Promise<Preview[]> {
  const z = correctPixels(readPixels(clean, null), fit.correction);
  const { rows, cols } = z;
  const n = rows * cols;
  const { insulating, gain } = levels;
  const amplitude = new Float32Array(n).fill(Number.NaN);
  const cos = new Float32Array(n).fill(Number.NaN);
  const sin = new Float32Array(n).fill(Number.NaN);
  const size = Math.hypot(insulating.re, insulating.im);
  const [c, s] = size > 0 ? [insulating.re / size, insulating.im / size] : [1, 0];
  for (let p = 0; p < n; p++) {
    if (z.usable[p] === 0) continue;
    const a = Math.hypot(z.re[p], z.im[p]);
    amplitude[p] = z.hasPhase ? a / gain : z.re[p] / gain;
    if (!z.hasPhase || !(a > 0)) continue;
    cos[p] = (z.re[p] * c + z.im[p] * s) / a;
    sin[p] = (z.im[p] * c - z.re[p] * s) / a;
  }
  const out = [await encode("amplitude", boxAverage(amplitude, rows, cols))];
  if (z.hasPhase) {
    const x = boxAverage(cos, rows, cols);
    const y = boxAverage(sin, rows, cols);
    out.push(await encode("phase", { ...x, values: x.values.map((v, k) => Math.atan2(y.values[k], v)) }));
  }
  if (clean.topography !== null) out.push(await encode("topography", boxAverage(dataOf(clean.topography), rows, cols)));
  return out;
}

export function boxAverage(data: Float32Array, rows: number, cols: number, most = MOST_PX): Averaged {
  const stepX = Math.ceil(cols / most);
  const stepY = Math.ceil(rows / most);
  const outRows = Math.ceil(rows / stepY);
  const outCols = Math.ceil(cols / stepX);
  if (stepX === 1 && stepY === 1) return { rows, cols, stepX, stepY, values: data.slice() };
  const values = new Float32Array(outRows * outCols);
  for (let a = 0, q = 0; a < outRows; a++) {
    const bottom = Math.min(rows, (a + 1) * stepY);
    for (let b = 0; b < outCols; b++, q++) {
      const right = Math.min(cols, (b + 1) * stepX);
      let sum = 0;
      let seen = 0;
      for (let i = a * stepY; i < bottom; i++) {
        for (let j = b * stepX; j < right; j++) {
          const v = data[i * cols + j];
          if (Number.isNaN(v)) continue;
          seen++;
          sum += v;
        }
      }
      const all = (bottom - a * stepY) * (right - b * stepX);
      values[q] = 2 * seen >= all && seen > 0 ? sum / seen : Number.NaN;
    }
  }
  return { rows: outRows, cols: outCols, stepX, stepY, values };
}

/** Where the codes 0 and 255 lie: the whole range, but for outliers (particles), which would leave no codes for the rest: no farther than
 *  the width of the middle 98 % beyond them. */
export function codeRange(values: Float32Array): { low: number; high: number } {
  const kept = values.slice();
  const n = dropNaNInPlace(kept);
  if (n === 0) return { low: 0, high: 1 };
  const at = (share: number): number => selectInPlace(kept, Math.round(share * (n - 1)), n);
  const lowest = at(0);
  const highest = at(1);
  const spread = at(0.99) - at(0.01);
  const low = Math.max(lowest, at(0.01) - spread);
  const high = Math.min(highest, at(0.99) + spread);
  return high > low ? { low, high } : { low, high: low + 1 };
}

async function encode(channel: ChannelName, a: Averaged): Promise<Preview> {
  const { low, high } = codeRange(a.values);
  const n = a.rows * a.cols;
  const pixels = new Uint8Array(4 * n);
  for (let q = 0; q < n; q++) {
    const v = a.values[q];
    if (Number.isNaN(v)) continue;
    const code = Math.round(255 * Math.min(1, Math.max(0, (v - low) / (high - low))));
    pixels[4 * q] = code;
    pixels[4 * q + 1] = code;
    pixels[4 * q + 2] = code;
    pixels[4 * q + 3] = 255;
  }
  const image = await sharp(pixels, { raw: { width: a.cols, height: a.rows, channels: 4 } })
    .webp({ lossless: true, effort: 3 })
    .toBuffer();
  return {
    channel,
    rows: a.rows,
    cols: a.cols,
    stepX: a.stepX,
    stepY: a.stepY,
    low,
    high,
    image: new Uint8Array(image),
  };
}
