/** What comes of a trace and its retrace. */
export interface Joined {
  /** Noise of the average, one standard deviation a pixel; null where the two could not be averaged. */
  readonly noiseSd: number | null;
  /** What the user must be told; null where the two agree. */
  readonly disagreement: string | null;
}

/** Pixels further apart than so many standard deviations of the difference do not show the same thing. */
const OUTLIER_SD = 8;
/** With more of them than this the two lines as a whole do not belong together. */
const MOST_OUTLIERS = 0.05;
/** An average of two images further apart than this, in pixels along the scan line, would widen every wall. */
const MOST_SHIFT_PX = 0.1;
/** With less likeness than this they do not show the same place. */
const LEAST_CORRELATION = 0.2;
/** The median of fewer pixels would take a good part of their noise with it. */
const LEAST_IN_ROW = 16;
/** Normal distribution: standard deviation over median absolute deviation, 1/Φ⁻¹(3/4). */
const SD_PER_MAD = 1.482602218505602;

/**
 * Averages a retrace into its trace, in place, where the two agree; a pixel where they do not becomes NaN, and so does one that either
 * lacks. Their difference d, less its median, holds the noise of both and nothing of the sample: sd(d) = √2 σ of one scan, 2 σ of
 * the average. sd(d) is taken from the median absolute deviation, which walls that are shifted a little between the two do not move; for
 * the noise about the mean of each row.
 * Where as a whole they do not agree (shifted against each other, too many pixels apart, no likeness), the trace stays as it is.
 * @param trace   the values, row-major, overwritten with the average
 * @param cols    columns, along the scan line
 * @param angle   values are angles in rad: differences are taken around the circle
 */
export function joinRetrace(trace: Float32Array, retrace: Float32Array, cols: number, angle: boolean): Joined {
  const difference = (k: number): number => between(trace[k], retrace[k], angle);
  const all = new Float64Array(trace.length);
  let n = 0;
  for (let k = 0; k < trace.length; k++) {
    const d = difference(k);
    if (Number.isFinite(d)) all[n++] = d;
  }
  const d = all.subarray(0, n);
  if (n < 16) return { noiseSd: null, disagreement: "trace and retrace have hardly a pixel in common: trace alone" };
  const middle = medianOf(d.slice());
  const sd = SD_PER_MAD * medianOf(d.map((v) => Math.abs(v - middle)));
  const reach = OUTLIER_SD * sd;
  const shift = shiftPx(trace, retrace, cols, angle, middle, sd);
  if (Math.abs(shift.px) > Math.max(MOST_SHIFT_PX, 4 * shift.sdPx)) {
    const words = `the retrace lies ${Math.abs(shift.px).toFixed(2)} pixels further along the scan line: trace alone`;
    return { noiseSd: null, disagreement: words };
  }
  const outliers = d.reduce((count, v) => count + (Math.abs(v - middle) > reach ? 1 : 0), 0);
  const percent = ((100 * outliers) / n).toFixed(1);
  if (sd > 0 && outliers > MOST_OUTLIERS * n) {
    return { noiseSd: null, disagreement: `trace and retrace differ in ${percent} % of the pixels: trace alone` };
  }
  if (d.every((v) => v === 0)) {
    return {
      noiseSd: null,
      disagreement: "the retrace is a copy of the trace: nothing to average, no word on the noise",
    };
  }
  const within = withoutRows(difference, trace.length, cols, reach);
  if (!angle) {
    // A frame without structure is all noise, unlike on the way back. What two places differ by goes on from row to row; noise does not.
    const r = correlation(trace, retrace);
    if (r < LEAST_CORRELATION && alikeAcrossRows(within.left, cols) > LEAST_CORRELATION) {
      return {
        noiseSd: null,
        disagreement: `trace and retrace do not look alike (correlation ${r.toFixed(2)}): trace alone`,
      };
    }
  }
  for (let k = 0; k < trace.length; k++) {
    const here = difference(k);
    // Also NaN where the difference is no number.
    trace[k] = sd === 0 || Math.abs(here - middle) <= reach ? trace[k] - here / 2 : NaN;
  }
  const disagreement =
    sd > 0 && outliers > 0 && outliers > 0.005 * n
      ? `trace and retrace differ in ${percent} % of the pixels, which count as not measured`
      : null;
  return { noiseSd: within.sd > 0 ? within.sd / 2 : null, disagreement };
}

/** The differences less what their whole row differs by: the mean of those near the row's median. NaN where the row has too few. */
function withoutRows(
  difference: (k: number) => number,
  length: number,
  cols: number,
  reach: number,
): { readonly left: Float64Array; readonly sd: number } {
  const left = new Float64Array(length).fill(NaN);
  const sizes = new Float64Array(length);
  const row = new Float64Array(cols);
  let n = 0;
  for (let from = 0; from < length; from += cols) {
    let m = 0;
    for (let k = from; k < from + cols; k++) {
      const d = difference(k);
      if (Number.isFinite(d)) row[m++] = d;
    }
    if (m < Math.min(LEAST_IN_ROW, cols)) continue;
    const middle = medianOf(row.slice(0, m));
    const near = row.subarray(0, m).filter((d) => Math.abs(d - middle) <= reach);
    const mean = near.reduce((sum, d) => sum + d, 0) / near.length;
    for (let k = from; k < from + cols; k++) {
      const d = difference(k);
      if (!Number.isFinite(d)) continue;
      left[k] = d - mean;
      // The mean has taken its part of the noise with it.
      sizes[n++] = Math.abs(left[k]) * Math.sqrt(near.length / Math.max(1, near.length - 1));
    }
  }
  return { left, sd: n === 0 ? 0 : SD_PER_MAD * medianOf(sizes.subarray(0, n)) };
}

/** Correlation of a pixel with the one below it. */
function alikeAcrossRows(left: Float64Array, cols: number): number {
  let [cross, own] = [0, 0];
  for (let k = 0; k + cols < left.length; k++) {
    const [a, b] = [left[k], left[k + cols]];
    if (!Number.isFinite(a + b)) continue;
    cross += a * b;
    own += (a * a + b * b) / 2;
  }
  return own > 0 ? cross / own : 0;
}

function between(a: number, b: number, angle: boolean): number {
  const d = a - b;
  return angle ? d - 2 * Math.PI * Math.round(d / (2 * Math.PI)) : d;
}

/**
 * Shift of the retrace against the trace along the rows, by one step of least squares on the slope g of their mean: d = s g. What the
 * noise adds to Σ g², sd²/8 a pixel, is taken off. Right for shifts below a pixel, too small for larger ones, which is enough
 * to tell that they are not small.
 */
function shiftPx(
  trace: Float32Array,
  retrace: Float32Array,
  cols: number,
  angle: boolean,
  middle: number,
  sd: number,
): { readonly px: number; readonly sdPx: number } {
  let [dg, gg, n] = [0, 0, 0];
  for (let k = 1; k + 1 < trace.length; k++) {
    if (k % cols === 0 || k % cols === cols - 1) continue;
    const d = between(trace[k], retrace[k], angle) - middle;
    const ga = between(trace[k + 1], trace[k - 1], angle) / 2;
    const gb = between(retrace[k + 1], retrace[k - 1], angle) / 2;
    const g = (ga + gb) / 2;
    // A speck on one of the two is no shift: a wall has a slope on both.
    const reach = OUTLIER_SD * sd + 4 * Math.min(Math.abs(ga), Math.abs(gb));
    if (!Number.isFinite(d + g) || Math.abs(d) > reach) continue;
    dg += d * g;
    gg += g * g;
    n++;
  }
  const slope = gg - (n * sd * sd) / 8;
  // Hardly any slope above the noise: no shift can be seen, and none does harm.
  if (!(slope > 0.05 * gg)) return { px: 0, sdPx: Infinity };
  return { px: dg / slope, sdPx: (sd * Math.sqrt(gg)) / slope };
}

function medianOf(values: Float64Array): number {
  const sorted = values.sort();
  return (sorted[(sorted.length - 1) >> 1] + sorted[sorted.length >> 1]) / 2;
}

function correlation(a: Float32Array, b: Float32Array): number {
  let [n, sa, sb] = [0, 0, 0];
  const sound = (k: number): boolean => Number.isFinite(a[k]) && Number.isFinite(b[k]);
  for (let k = 0; k < a.length; k++) {
    if (!sound(k)) continue;
    n++;
    sa += a[k];
    sb += b[k];
  }
  let [aa, bb, ab] = [0, 0, 0];
  for (let k = 0; k < a.length; k++) {
    if (!sound(k)) continue;
    const [u, v] = [a[k] - sa / n, b[k] - sb / n];
    aa += u * u;
    bb += v * v;
    ab += u * v;
  }
  return aa > 0 && bb > 0 ? ab / Math.sqrt(aa * bb) : 1;
}
