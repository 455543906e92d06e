import { lineLength, lineTangents } from "../../model/line_length.js";

/** A polyline at even arc spacing, smoothed, with unit normals to its left as the image is looked at (x right, y down). */
export interface SmoothLine {
  readonly points: Float64Array;
  readonly normals: Float64Array;
  readonly arcNm: Float64Array;
  readonly lengthNm: number;
}

/** Even spacing, then smoothing along the arc by 2G − G² with G a Gaussian: flat to fourth order in the wave number, so that
 *  bends do not shrink as they do under G alone (the two-step remedy of Taubin 1995, Proc. SIGGRAPH, 351, done in one kernel).
 *  Open lines are continued by point reflection at their ends, which therefore stay where they are. The length counts each step
 *  as the circular arc through its turning angle, not as the chord.
 *  @param points interleaved x, y in nm; a closed line does not repeat its first point
 *  @returns null where the line has no length */
export function smoothLine(points: Float64Array, closed: boolean, stepNm: number, sigmaNm: number): SmoothLine | null {
  const even = resample(points, closed, stepNm);
  if (even === null) return null;
  const { line, stepNm: step } = even;
  const smooth = sigmaNm > 0 ? filter(line, closed, sigmaNm / step) : line;
  const count = smooth.length / 2;
  const tangents = lineTangents(smooth, closed);
  const { arc: arcNm, length: lengthNm } = lineLength(smooth, closed);
  const normals = new Float64Array(2 * count);
  for (let k = 0; k < count; k++) {
    normals[2 * k] = tangents[2 * k + 1];
    normals[2 * k + 1] = -tangents[2 * k];
  }
  return { points: smooth, normals, arcNm, lengthNm };
}

function resample(
  points: Float64Array,
  closed: boolean,
  stepNm: number,
): { line: Float64Array; stepNm: number } | null {
  const n = points.length / 2;
  const total = new Float64Array(n + 1);
  const steps = closed ? n : n - 1;
  for (let k = 1; k <= steps; k++) {
    const a = k - 1;
    const b = k % n;
    total[k] = total[a] + Math.hypot(points[2 * b] - points[2 * a], points[2 * b + 1] - points[2 * a + 1]);
  }
  const length = total[steps];
  if (!(length > 0)) return null;
  const cells = Math.max(closed ? 6 : 2, Math.round(length / stepNm));
  const step = length / cells;
  const count = closed ? cells : cells + 1;
  const slopes = vertexSlopes(points, total, closed);
  const line = new Float64Array(2 * count);
  let k = 1;
  for (let m = 0; m < count; m++) {
    const at = m * step;
    while (k < steps && total[k] < at) k++;
    const a = k - 1;
    const b = k % n;
    const span = total[k] - total[a];
    const t = span > 0 ? Math.min(1, (at - total[a]) / span) : 0;
    // cubic Hermite: chords would cut every bend short, and a small domain loses a percent or more of its wall
    const h01 = t * t * (3 - 2 * t);
    const h10 = t * (1 - t) * (1 - t) * span;
    const h11 = -t * t * (1 - t) * span;
    for (let c = 0; c < 2; c++) {
      line[2 * m + c] =
        points[2 * a + c] * (1 - h01) + points[2 * b + c] * h01 + slopes[2 * a + c] * h10 + slopes[2 * b + c] * h11;
    }
  }
  return { line, stepNm: step };
}

/** Derivative by chord length at each vertex, of the parabola through it and its neighbours. A vertex that sits almost on its
 *  neighbour takes the direction from neighbour to neighbour: the short chord's own direction is rounding and noise. */
function vertexSlopes(points: Float64Array, total: Float64Array, closed: boolean): Float64Array {
  const n = points.length / 2;
  const out = new Float64Array(2 * n);
  const length = closed ? total[n] : total[n - 1];
  for (let k = 0; k < n; k++) {
    const a = k > 0 ? k - 1 : closed ? n - 1 : 0;
    const b = k + 1 < n ? k + 1 : closed ? 0 : n - 1;
    const before = k > 0 ? total[k] - total[a] : closed ? length - total[n - 1] : 0;
    const after = k + 1 < n ? total[k + 1] - total[k] : closed ? length - total[k] : 0;
    const both = before + after;
    if (!(both > 0)) continue;
    const even = Math.min(before, after) > 0.2 * both;
    for (let c = 0; c < 2; c++) {
      const down = even ? (points[2 * k + c] - points[2 * a + c]) / before : 0;
      const up = even ? (points[2 * b + c] - points[2 * k + c]) / after : 0;
      out[2 * k + c] = even ? (down * after + up * before) / both : (points[2 * b + c] - points[2 * a + c]) / both;
    }
  }
  return out;
}

function filter(line: Float64Array, closed: boolean, sigmaSteps: number): Float64Array {
  const once = gaussian(line, closed, sigmaSteps);
  const twice = gaussian(once, closed, sigmaSteps);
  for (let k = 0; k < line.length; k++) once[k] = 2 * once[k] - twice[k];
  return once;
}

function gaussian(line: Float64Array, closed: boolean, sigmaSteps: number): Float64Array {
  const n = line.length / 2;
  const half = Math.max(1, Math.min(Math.ceil(4 * sigmaSteps), closed ? 4 * n : n - 1));
  const kernel = new Float64Array(half + 1);
  let sum = 0;
  for (let q = 0; q <= half; q++) {
    kernel[q] = Math.exp((-q * q) / (2 * sigmaSteps * sigmaSteps));
    sum += q === 0 ? kernel[q] : 2 * kernel[q];
  }
  const out = new Float64Array(2 * n);
  for (let k = 0; k < n; k++) {
    for (let c = 0; c < 2; c++) {
      let acc = 0;
      for (let q = -half; q <= half; q++) {
        const m = k + q;
        let v: number;
        if (closed) v = line[2 * (((m % n) + n) % n) + c];
        else if (m < 0) v = 2 * line[c] - line[2 * -m + c];
        else if (m >= n) v = 2 * line[2 * (n - 1) + c] - line[2 * (2 * (n - 1) - m) + c];
        else v = line[2 * m + c];
        acc += kernel[Math.abs(q)] * v;
      }
      out[2 * k + c] = acc / sum;
    }
  }
  return out;
}
