import { wrapAngle } from "../../numerics/quantile.js";
import type { ChannelSums, Grid, HeightSums } from "./grid.js";
import { FOOT, type Judged } from "./residuals.js";

/** Departures beyond this many standard deviations count no more: one frame's domain must not outweigh the others. */
const CLIP = 3;
/** Departure of the logarithm of the amplitude beyond which noise rules. */
const MOST_LOG = 2;
/** A departure that counts as seen. */
const SEEN = 1;

/** Size of a frame, and where its first pixel lies on the grid, to the nearest grid pixel. */
export interface Placed {
  readonly rows: number;
  readonly cols: number;
  readonly atRow: number;
  readonly atCol: number;
}

/** One channel of a frame with what its departures are measured by. */
export interface Channel {
  readonly values: Float32Array;
  readonly judged: Judged;
}

/** Adds one frame's departures of the logarithm of the amplitude and of the phase (null: not measured), and of both together, to the sums of the grid. Frames
 *  of one cooldown may differ in size. */
export function addSignal(grid: Grid, log: Channel, phase: Channel | null, at: Placed): void {
  const { ring, flat } = log.judged;
  const { pair } = grid;
  const { from, to, first, last } = overlap(grid, at);
  for (let i = first; i < last; i++) {
    const row = i * at.cols;
    const onGrid = (i + at.atRow) * grid.cols + at.atCol;
    const blocks = (i >> ring.shift) * ring.blockCols;
    for (let j = from; j < to; j++) {
      const b = blocks + (j >> ring.shift);
      if (flat[b] === 0) {
        // on to the next block
        j |= (1 << ring.shift) - 1;
        continue;
      }
      const g = onGrid + j;
      const a = log.values[row + j] - ring.reference[b];
      const isKnown = !Number.isNaN(a);
      if (isKnown) {
        const z = a * log.judged.perSd[b];
        add(grid.looseAmplitude, g, z);
        if (isStrict(log.judged, b, z)) add(grid.amplitude, g, z);
      }
      // surroundings flat in the phase are so in the amplitude
      if (phase === null || grid.phase === null || phase.judged.flat[b] === 0) continue;
      const t = phase.values[row + j] - phase.judged.ring.reference[b];
      if (Number.isNaN(t)) continue;
      const z = t * phase.judged.perSd[b];
      if (isStrict(phase.judged, b, z)) add(grid.phase, g, z);
      if (!isKnown) continue;
      pair.log[g] += a > MOST_LOG ? MOST_LOG : a < -MOST_LOG ? -MOST_LOG : a;
      pair.turn[g] += t > -3 && t < 3 ? t : wrapAngle(t);
      pair.count[g]++;
    }
  }
}

function isStrict({ calm, towards, beyond }: Judged, b: number, z: number): boolean {
  if (towards[b] === 0) return true;
  const step = z * towards[b];
  return calm[b] === 1 && !(step > FOOT && step < beyond[b]);
}

function add({ sum, count, above, below }: ChannelSums, g: number, z: number): void {
  sum[g] += z > CLIP ? CLIP : z < -CLIP ? -CLIP : z;
  count[g]++;
  if (z > SEEN) above[g]++;
  else if (z < -SEEN) below[g]++;
}

/** Adds one frame's heights over the film, nm; NaN = not measured. */
export function addHeights(grid: Grid, sums: HeightSums, heightNm: Float32Array, at: Placed): void {
  const { from, to, first, last } = overlap(grid, at);
  for (let i = first; i < last; i++) {
    const onGrid = (i + at.atRow) * grid.cols + at.atCol;
    for (let j = from; j < to; j++) {
      const h = heightNm[i * at.cols + j];
      if (Number.isNaN(h)) continue;
      sums.sum[onGrid + j] += h;
      sums.squares[onGrid + j] += h * h;
      sums.count[onGrid + j]++;
    }
  }
}

/** Rows and columns of a frame that lie on the grid: from, and up to but not with. */
function overlap(
  grid: Grid,
  { rows, cols, atRow, atCol }: Placed,
): { readonly first: number; readonly last: number; readonly from: number; readonly to: number } {
  return {
    first: Math.max(0, -atRow),
    last: Math.min(rows, grid.rows - atRow),
    from: Math.max(0, -atCol),
    to: Math.min(cols, grid.cols - atCol),
  };
}
