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
/** The spectrum is the mean over square windows of this side, which has as many frequencies as there are bins: so many along an axis, evenly
 *  over the image (P. D. Welch 1967, IEEE Trans. Audio Electroacoust. 15, 70). */
const WINDOW_PX = 2 * BINS;
const WINDOWS = 3;

function radialSpectrum(
  values: Float32Array,
  usable: Uint8Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
): RadialSpectrum {
  const high = Math.min(rows, WINDOW_PX);
  const wide = Math.min(cols, WINDOW_PX);
  const paddedRows = fastLength(high);
  const paddedCols = fastLength(wide);
  // up to the Nyquist frequency of the coarser axis: beyond it the rings are no longer whole
  const largest = Math.PI / Math.max(pixel.xNm, pixel.yNm);
  const bins = ringOfEach(paddedRows, paddedCols, pixel, largest);
  const power = new Float64Array(BINS);
  const count = new Float64Array(BINS);
  const wavenumber = new Float64Array(BINS);
  const hannX = hann(wide);
  const hannY = hann(high);
  for (const top of startsOf(rows, high)) {
    for (const left of startsOf(cols, wide)) {
      const windowed = new Float64Array(paddedRows * paddedCols);
      const mean = meanIn(values, usable, cols, top, left, high, wide);
      for (let i = 0; i < high; i++) {
        for (let j = 0, p = (top + i) * cols + left, q = i * paddedCols; j < wide; j++, p++, q++)
          if (usable[p] === 1) windowed[q] = (values[p] - mean) * hannY[i] * hannX[j];
      }
      const transform = dft2(windowed, paddedRows, paddedCols);
      for (let k = 0; k < bins.length; k++) {
        const bin = bins[k];
        if (bin >= BINS) continue;
        power[bin] += transform[2 * k] * transform[2 * k] + transform[2 * k + 1] * transform[2 * k + 1];
        count[bin] += 2;
      }
    }
  }
  for (let b = 0; b < BINS; b++) {
    wavenumber[b] = ((b + 0.5) / BINS) * largest;
    if (count[b] > 0) power[b] *= 2 / count[b];
  }
  const highest = Array.from(power.subarray(Math.floor(0.8 * BINS))).sort((a, b) => a - b);
  return { wavenumber, power, count, noise: highest[highest.length >> 1] };
}

const hann = (n: number): Float64Array =>
  Float64Array.from({ length: n }, (_, k) => Math.sin((Math.PI * (k + 0.5)) / n) ** 2);

/** First pixels of windows of length `side` along an axis of `n` pixels. */
function startsOf(n: number, side: number): number[] {
  const windows = Math.min(WINDOWS, Math.ceil(n / side));
  return Array.from({ length: windows }, (_, k) => (windows === 1 ? 0 : Math.round((k * (n - side)) / (windows - 1))));
}

/** Ring that each frequency of a transform lies in; BINS where it does not count. kx = 0 holds the line offsets; negative kx the same as
 *  positive ones, the image being real. */
function ringOfEach(rows: number, cols: number, pixel: PixelSize, largest: number): Uint8Array {
  const out = new Uint8Array(rows * cols).fill(BINS);
  for (let i = 0; i < rows; i++) {
    const ky = (2 * Math.PI * (i <= rows / 2 ? i : i - rows)) / (rows * pixel.yNm);
    for (let j = 1; j < cols / 2; j++) {
      const kx = (2 * Math.PI * j) / (cols * pixel.xNm);
      const bin = Math.floor((Math.sqrt(kx * kx + ky * ky) / largest) * BINS);
      if (bin >= BINS) break;
      out[i * cols + j] = bin;
    }
  }
  return out;
}

function meanIn(
  values: Float32Array,
  usable: Uint8Array,
  cols: number,
  top: number,
  left: number,
  high: number,
  wide: number,
): number {
  let sum = 0;
  let n = 0;
  for (let i = top; i < top + high; i++) {
    for (let p = i * cols + left; p < i * cols + left + wide; p++) {
      if (usable[p] === 0) continue;
      sum += values[p];
      n++;
    }
  }
  return n > 0 ? sum / n : 0;
}
