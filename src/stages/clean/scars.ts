import { type NoiseByLevel, sdAt, shortWay } from "./noise.js";

/** Thickest scar looked for, in rows. */
const MOST_ROWS = 2;
/** Share of the departure by which the rows above and below may differ from each other and from the rows beyond them: a
 *  particle or wall seen through the tip is rounded over several rows, a scar is not. */
const SHARPNESS = 0.4;
/** One pixel less the mean of two others, in standard deviations of a pixel. */
const SD_OF_DEPARTURE = Math.sqrt(1.5);

export interface Scars {
  /** Scarred pixels: from and up to (not with) which index of the image, each within one row. */
  readonly runs: readonly (readonly [number, number])[];
  /** A scar of two rows has two runs. */
  readonly count: number;
}

export interface ScarSettings {
  readonly scarSigmas: number;
  readonly scarLeastPixels: number;
}

interface Scene {
  readonly values: Float32Array;
  /** The amplitude that the noise depends on, or null. */
  readonly level: Float32Array | null;
  readonly noise: NoiseByLevel;
  readonly rows: number;
  readonly cols: number;
  readonly isAngle: boolean;
}

/** Runs along a row that depart from the rows above and below: the same sign over at least `scarLeastPixels`, each pixel by more than
 *  half of `scarSigmas` standard deviations of the noise and their mean by more than `scarSigmas`, while the rows above and below
 *  agree with each other and with the rows beyond them. Nothing is filled in.
 *  @param scene values row-major [rows, cols], rows already referenced to each other; NaN = not measured */
export function findScars(scene: Scene, s: ScarSettings): Scars {
  const { values, level, noise, rows, cols } = scene;
  const runs: (readonly [number, number])[] = [];
  let count = 0;
  const mask = new Uint8Array(rows * cols);
  const perSd = 0.5 * s.scarSigmas * SD_OF_DEPARTURE;
  const quiet = perSd * (level === null ? noise.sd : Math.min(...noise.sds));
  const every = s.scarLeastPixels;
  for (let thick = 1; thick <= MOST_ROWS; thick++) {
    for (let i = 1; i + thick < rows; i++) {
      const here = i * cols;
      const up = here - cols;
      const down = here + thick * cols;
      // every run that is long enough holds one of these columns
      for (let j = every - 1; j < cols; j += every) {
        // most pixels are settled by the smallest noise of all, and angles a turn apart have no rows above and below that agree
        const d = values[here + j] - 0.5 * (values[up + j] + values[down + j]);
        if (!(d > quiet || d < -quiet) || mask[here + j] === 1) continue;
        if (level !== null && Math.abs(d) < perSd * sdAt(noise, level[up + j])) continue;
        const run = runAt(scene, i, thick, j, 0.5 * s.scarSigmas, mask);
        if (run === null) continue;
        j += every * Math.floor((run.to - 1 - j) / every);
        if (run.to - run.from < s.scarLeastPixels || !isScar(scene, i, thick, run, s.scarSigmas)) continue;
        for (let p = here; p < down; p += cols) {
          mask.fill(1, p + run.from, p + run.to);
          runs.push([p + run.from, p + run.to]);
        }
        count++;
      }
    }
  }
  return { runs, count };
}

/** Columns from and up to (not with) which the row departs, with the sums of the departures and of their standard deviations. */
interface Run {
  readonly from: number;
  readonly to: number;
  readonly sum: number;
  readonly sdSum: number;
}

/** The run of departures of one sign round a column, each by more than `sigmas`; null where there is none. */
function runAt(scene: Scene, row: number, thick: number, col: number, sigmas: number, mask: Uint8Array): Run | null {
  const { level, noise, cols } = scene;
  const sign = departure(scene, row, thick, col) > 0 ? 1 : -1;
  let sum = 0;
  let sdSum = 0;
  const departs = (j: number): boolean => {
    if (mask[row * cols + j] === 1) return false;
    const d = departure(scene, row, thick, j);
    const sd = SD_OF_DEPARTURE * (level === null ? noise.sd : sdAt(noise, level[(row - 1) * cols + j]));
    if (!(d * sign > sigmas * sd)) return false;
    sum += d;
    sdSum += sd;
    return true;
  };
  if (!departs(col)) return null;
  let from = col;
  while (from > 0 && departs(from - 1)) from--;
  let to = col + 1;
  while (to < cols && departs(to)) to++;
  return { from, to, sum, sdSum };
}

/** How far `thick` rows from `row` on depart from the mean of the rows above and below them, the one that departs least; 0 where their signs differ. */
function departure({ values, cols, isAngle }: Scene, row: number, thick: number, col: number): number {
  const here = row * cols + col;
  const base = values[here - cols];
  let across = values[here + thick * cols] - base;
  if (isAngle) across = shortWay(across);
  let first = values[here] - base;
  if (isAngle) first = shortWay(first);
  first -= 0.5 * across;
  if (thick === 1) return first;
  // both rows must depart: a scar of one row is not to take its neighbour along
  let last = values[here + (thick - 1) * cols] - base;
  if (isAngle) last = shortWay(last);
  last -= 0.5 * across;
  return first > 0 && last > 0 ? Math.min(first, last) : first < 0 && last < 0 ? Math.max(first, last) : 0;
}

function isScar(scene: Scene, row: number, thick: number, { from, to, sum, sdSum }: Run, sigmas: number): boolean {
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
