import type { CleanFrame } from "../../model/signal.js";
import { colsOf, dataOf, rowsOf, type PixelSize, type Raster } from "../../model/raster.js";
import { selectInPlace } from "../../numerics/quantile.js";
import { bestBlurNm } from "./best_blur.js";
import { stateMarks } from "./marks.js";
import type { DriftSettings } from "./settings.js";
import type { DriftImage } from "./types.js";

/** The image that a frame is registered by: its topography, or without one its amplitude and the marks in it that do not follow
 *  the states (a domain wall moves with temperature; a particle does not).
 *  Every row has its median taken off: line offsets then cannot pose as structure. The fine step frees the offset of each row anyway.
 *  @returns plain data of the frame's shape; nothing of `clean` is kept */
export function prepareForDrift(clean: CleanFrame, s: DriftSettings): DriftImage {
  const { topography, amplitude, pixel } = clean;
  if (topography !== null) {
    const image = levelRows(topography);
    return {
      frame: clean.frame,
      rows: rowsOf(topography),
      cols: colsOf(topography),
      pixel,
      channel: "topography",
      ...image,
      marks: null,
      blurNm: blurOf(image, topography, pixel, s),
    };
  }
  const rows = rowsOf(amplitude);
  const cols = colsOf(amplitude);
  const image = withoutMean(amplitude);
  const marks = stateMarks(dataOf(amplitude), rows, cols);
  return {
    frame: clean.frame,
    rows,
    cols,
    pixel,
    channel: "amplitude",
    ...image,
    marks: { ...marks, blurNm: blurOf(marks, amplitude, pixel, s) },
    blurNm: blurOf(image, amplitude, pixel, s),
  };
}

interface Image {
  readonly values: Float32Array;
  readonly usable: Uint8Array;
}

const blurOf = (image: Image, raster: Raster, pixel: PixelSize, s: DriftSettings): number =>
  bestBlurNm(image.values, image.usable, rowsOf(raster), colsOf(raster), pixel, s.leastBlurPx);

function levelRows(raster: Raster): Image {
  const data = dataOf(raster);
  const rows = rowsOf(raster);
  const cols = colsOf(raster);
  const values = new Float32Array(data.length);
  const usable = new Uint8Array(data.length);
  const row = new Float32Array(cols);
  for (let i = 0; i < rows; i++) {
    let n = 0;
    for (let j = 0; j < cols; j++) {
      const v = data[i * cols + j];
      if (!Number.isNaN(v)) row[n++] = v;
    }
    if (n === 0) continue;
    const middle = selectInPlace(row, n >> 1, n);
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      if (Number.isNaN(data[p])) continue;
      usable[p] = 1;
      values[p] = data[p] - middle;
    }
  }
  return { values, usable };
}

/** The amplitude's rows have one gain already, and a row's median there follows the states: only the mean is taken off. */
function withoutMean(raster: Raster): Image {
  const data = dataOf(raster);
  const values = new Float32Array(data.length);
  const usable = new Uint8Array(data.length);
  let sum = 0;
  let n = 0;
  for (const v of data) {
    if (Number.isNaN(v)) continue;
    sum += v;
    n++;
  }
  const mean = n > 0 ? sum / n : 0;
  for (let p = 0; p < data.length; p++) {
    if (Number.isNaN(data[p])) continue;
    usable[p] = 1;
    values[p] = data[p] - mean;
  }
  return { values, usable };
}
