import { type NoiseByLevel, sdAt, shortWay } from "./noise.js";

/** Thickest scar looked for, in rows. */
const MOST_ROWS = 2;
/** Share of the departure by which the rows above and below may differ from each other and from the rows beyond them: a
 *  particle or wall seen through the tip is rounded over several rows, a scar is not. */
const SHARPNESS = 0.4;
/** One pixel less the mean of two others, in standard deviations of a pixel. */
const SD_OF_DEPARTURE = Math.sqrt(1.5);

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
  const scene: Scene = { values, rows, cols, isAngle };
  const mask = new Uint8Array(rows * cols);
  let runs = 0;
  const depart = new Float64Array(cols);
  const sd = new Float64Array(cols).fill(noise.sd * SD_OF_DEPARTURE);
  const quiet = 0.5 * sigmas * SD_OF_DEPARTURE * (level === null ? noise.sd : Math.min(...noise.sds));
  for (let thick = 1; thick <= MOST_ROWS; thick++) {
    for (let i = 1; i + thick < rows; i++) {
      departures(scene, i, thick, quiet, depart);
      const up = (i - 1) * cols;
      for (let j = 0; j < cols; j++) {
        // most pixels are settled by the smallest noise of all: only the others ask for their own
        if (!(Math.abs(depart[j]) > quiet) || mask[i * cols + j] === 1) continue;
        const from = j;
        const sign = Math.sign(depart[j]);
        for (; j < cols && mask[i * cols + j] === 0; j++) {
          if (level !== null) sd[j] = SD_OF_DEPARTURE * sdAt(noise, level[up + j]);
          if (!(depart[j] * sign > 0.5 * sigmas * sd[j])) break;
        }
        if (j - from < leastPixels || !isScar(scene, i, thick, from, j, depart, sd, sigmas)) continue;
        for (let t = 0; t < thick; t++) mask.fill(1, (i + t) * cols + from, (i + t) * cols + j);
        runs++;
      }
    }
  }
  let pixels = 0;
  for (const m of mask) pixels += m;
  return { mask, pixels, runs };
}

interface Scene {
  readonly values: Float32Array;
  readonly rows: number;
  readonly cols: number;
  readonly isAngle: boolean;
}

/** How far `thick` rows from `row` on depart from the mean of the rows above and below them, by column; 0 for what is no more than `quiet`. */
function departures(
  { values, cols, isAngle }: Scene,
  row: number,
  thick: number,
  quiet: number,
  out: Float64Array,
): void {
  const up = (row - 1) * cols;
  const here = row * cols;
  const last = (row + thick - 1) * cols;
  const down = (row + thick) * cols;
  for (let j = 0; j < cols; j++) {
    const base = values[up + j];
    let across = values[down + j] - base;
    let s = values[here + j] - base;
    if (isAngle) {
      across = shortWay(across);
      s = shortWay(s);
    }
    s -= 0.5 * across;
    if (!(s > quiet || s < -quiet)) {
      out[j] = 0;
      continue;
    }
    if (thick > 1) {
      // both rows must depart: a scar of one row is not to take its neighbour along
      let t = values[last + j] - base;
      if (isAngle) t = shortWay(t);
      t -= 0.5 * across;
      s = s > 0 && t > 0 ? Math.min(s, t) : s < 0 && t < 0 ? Math.max(s, t) : 0;
    }
    out[j] = s;
  }
}

function isScar(
  scene: Scene,
  row: number,
  thick: number,
  from: number,
  to: number,
  depart: Float64Array,
  sd: Float64Array,
  sigmas: number,
): boolean {
  let sum = 0;
  let sdSum = 0;
  for (let j = from; j < to; j++) {
    sum += depart[j];
    sdSum += sd[j];
  }
  if (Math.abs(sum) < sigmas * sdSum) return false;
  const least = SHARPNESS * Math.abs(sum / (to - from));
  const above = row - 1;
  const below = row + thick;
  return (
    Math.abs(stepBetween(scene, above, below, from, to)) < least &&
    Math.abs(stepBetween(scene, above, above - 1, from, to)) < least &&
    Math.abs(stepBetween(scene, below, below + 1, from, to)) < least
  );
}

/** Mean difference of two rows over some columns; 0 where there is nothing to compare. */
function stepBetween(scene: Scene, a: number, b: number, from: number, to: number): number {
  const { values, rows, cols, isAngle } = scene;
  if (a < 0 || b < 0 || a >= rows || b >= rows) return 0;
  let sum = 0;
  let count = 0;
  for (let j = from; j < to; j++) {
    let d = values[a * cols + j] - values[b * cols + j];
    if (Number.isNaN(d)) continue;
    if (isAngle) d = shortWay(d);
    sum += d;
    count++;
  }
  return count > 0 ? sum / count : 0;
}
