import { wrapAngle } from "../../numerics/quantile.js";
import { type NoiseByLevel, sdAt } from "./noise.js";

/** Thickest scar looked for, in rows. */
const MOST_ROWS = 2;
/** Share of the departure by which the rows above and below may differ from each other and from the rows beyond them: a
 *  particle or wall seen through the tip is rounded over several rows, a scar is not. */
const SHARPNESS = 0.4;

export interface Scars {
  /** 1 = scarred. */
  readonly mask: Uint8Array;
  readonly pixels: number;
  readonly runs: number;
}

/** Runs along a row that depart from the rows above and below: the same sign over at least `leastPixels`, each pixel by more than
 *  half of `sigmas` standard deviations of the noise and their mean by more than `sigmas`, while the rows above and below
 *  agree with each other and with the rows beyond them. Nothing is filled in.
 *  @param values row-major [rows, cols], rows already referenced to each other; NaN = not measured
 *  @param level the amplitude that the noise depends on, or null */
export function findScars(
  values: Float32Array,
  level: Float32Array | null,
  noise: NoiseByLevel,
  rows: number,
  cols: number,
  isAngle: boolean,
  sigmas: number,
  leastPixels: number,
): Scars {
  const mask = new Uint8Array(rows * cols);
  let runs = 0;
  const difference = (a: number, b: number): number => (isAngle ? wrapAngle(a - b) : a - b);
  const depart = new Float64Array(cols);
  const sd = new Float64Array(cols);
  for (let thick = 1; thick <= MOST_ROWS; thick++) {
    const perSd = Math.sqrt(1 / thick + 0.5);
    for (let i = 1; i + thick < rows; i++) {
      const up = (i - 1) * cols;
      const down = (i + thick) * cols;
      for (let j = 0; j < cols; j++) {
        const base = values[up + j];
        const middle = base + 0.5 * difference(values[down + j], base);
        let s = difference(values[i * cols + j], middle);
        if (thick === 2) s = 0.5 * (s + difference(values[(i + 1) * cols + j], middle));
        depart[j] = s;
        sd[j] = perSd * (level === null ? noise.sd : sdAt(noise, level[up + j]));
      }
      let j = 0;
      while (j < cols) {
        const sign = Math.sign(depart[j]);
        const from = j;
        while (j < cols && depart[j] * sign > 0.5 * sigmas * sd[j] && mask[i * cols + j] === 0) j++;
        if (j - from >= leastPixels && isScar(from, j, i, thick)) {
          for (let t = 0; t < thick; t++) mask.fill(1, (i + t) * cols + from, (i + t) * cols + j);
          runs++;
        }
        if (j === from) j++;
      }
    }
  }
  let pixels = 0;
  for (const m of mask) pixels += m;
  return { mask, pixels, runs };

  function isScar(from: number, to: number, row: number, thick: number): boolean {
    const n = to - from;
    let mean = 0;
    let meanSd = 0;
    for (let j = from; j < to; j++) {
      mean += depart[j] / n;
      meanSd += sd[j] / n;
    }
    if (Math.abs(mean) < sigmas * meanSd) return false;
    const step = (a: number, b: number): number => {
      if (a < 0 || b < 0 || a >= rows || b >= rows) return 0;
      let sum = 0;
      let count = 0;
      for (let j = from; j < to; j++) {
        const v = difference(values[a * cols + j], values[b * cols + j]);
        if (Number.isNaN(v)) continue;
        sum += v;
        count++;
      }
      return count > 0 ? sum / count : 0;
    };
    const least = SHARPNESS * Math.abs(mean);
    const above = row - 1;
    const below = row + thick;
    return (
      Math.abs(step(above, below)) < least &&
      Math.abs(step(above, above - 1)) < least &&
      Math.abs(step(below, below + 1)) < least
    );
  }
}
