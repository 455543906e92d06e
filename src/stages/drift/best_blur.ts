import type { PixelSize } from "../../model/raster.js";
import { dft2 } from "../../raster/opencv.js";
import { fastLength } from "../../raster/fourier.js";

/** Candidates are this factor apart; the loss between two neighbours is below a percent of the error. */
const STEP = 1.2;
const LARGEST_PX = 6;

/** Blur (standard deviation, nm) that makes the error of a shift between two frames like this one smallest.
 *
 *  With S(k) the power of the structure, N that of the noise and B the blur's response, the shift that makes two blurred frames
 *  agree has the variance Σ k² B⁴ (2 S N + N²) / (Σ k² B² S)² along one axis, twice the known-template bound where B = 1 and S ≫ N. S + N is
 *  the frame's own spectrum, N its level at the highest frequencies.
 *  @param values row-major; read where `usable` is 1
 *  @returns at least `leastPx` times the larger pixel, where interpolation is still exact */
export function bestBlurNm(
  values: Float32Array,
  usable: Uint8Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
  leastPx: number,
): number {
  const spectrum = radialSpectrum(values, usable, rows, cols, pixel);
  const least = leastPx * Math.max(pixel.xNm, pixel.yNm);
  let best = least;
  let bestVariance = Number.POSITIVE_INFINITY;
  for (let sigma = least; sigma <= LARGEST_PX * Math.max(pixel.xNm, pixel.yNm); sigma *= STEP) {
    let top = 0;
    let bottom = 0;
    for (let b = 0; b < spectrum.power.length; b++) {
      const k = spectrum.wavenumber[b];
      const signal = Math.max(0, spectrum.power[b] - spectrum.noise);
      const response2 = Math.exp(-k * k * sigma * sigma);
      top += spectrum.count[b] * k * k * response2 * response2 * spectrum.noise * (2 * signal + spectrum.noise);
      bottom += spectrum.count[b] * k * k * response2 * signal;
    }
    const variance = bottom > 0 ? top / (bottom * bottom) : Number.POSITIVE_INFINITY;
    if (variance < bestVariance) {
      best = sigma;
      bestVariance = variance;
    }
  }
  return best;
}

interface RadialSpectrum {
  /** rad/nm */
  readonly wavenumber: Float64Array;
  readonly power: Float64Array;
  readonly count: Float64Array;
  readonly noise: number;
}

const BINS = 64;

function radialSpectrum(
  values: Float32Array,
  usable: Uint8Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
): RadialSpectrum {
  const paddedRows = fastLength(rows);
  const paddedCols = fastLength(cols);
  const windowed = new Float64Array(paddedRows * paddedCols);
  let sum = 0;
  let n = 0;
  for (let p = 0; p < values.length; p++) {
    if (usable[p] === 0) continue;
    sum += values[p];
    n++;
  }
  const mean = n > 0 ? sum / n : 0;
  const wx = Float64Array.from({ length: cols }, (_, j) => Math.sin((Math.PI * (j + 0.5)) / cols) ** 2);
  for (let i = 0; i < rows; i++) {
    const wy = Math.sin((Math.PI * (i + 0.5)) / rows) ** 2;
    for (let j = 0, p = i * cols, q = i * paddedCols; j < cols; j++, p++, q++)
      if (usable[p] === 1) windowed[q] = (values[p] - mean) * wy * wx[j];
  }
  const transform = dft2(windowed, paddedRows, paddedCols);
  // up to the Nyquist frequency of the coarser axis: beyond it the rings are no longer whole
  const largest = Math.PI / Math.max(pixel.xNm, pixel.yNm);
  const power = new Float64Array(BINS);
  const count = new Float64Array(BINS);
  const wavenumber = new Float64Array(BINS);
  for (let i = 0; i < paddedRows; i++) {
    const ky = (2 * Math.PI * (i <= paddedRows / 2 ? i : i - paddedRows)) / (paddedRows * pixel.yNm);
    // kx = 0 holds the line offsets; negative kx the same as positive ones, the image being real
    for (let j = 1; j < paddedCols / 2; j++) {
      const kx = (2 * Math.PI * j) / (paddedCols * pixel.xNm);
      const bin = Math.floor((Math.sqrt(kx * kx + ky * ky) / largest) * BINS);
      if (bin >= BINS) break;
      const q = 2 * (i * paddedCols + j);
      power[bin] += transform[q] * transform[q] + transform[q + 1] * transform[q + 1];
      count[bin] += 2;
    }
  }
  for (let b = 0; b < BINS; b++) {
    wavenumber[b] = ((b + 0.5) / BINS) * largest;
    if (count[b] > 0) power[b] *= 2 / count[b];
  }
  const highest = Array.from(power.subarray(Math.floor(0.8 * BINS))).sort((a, b) => a - b);
  return { wavenumber, power, count, noise: highest[highest.length >> 1] };
}
