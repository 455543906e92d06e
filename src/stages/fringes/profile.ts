import type { Grid } from "./grid.js";
import type { NoiseModel } from "./noise.js";
import { NEAR_LAG, ROW_LAG } from "./row_noise.js";
import type { Stretch } from "./stretches.js";

/** The component across the chord against signed distance, averaged over one stretch. Bins ordered by distance. */
export interface Profile {
  readonly count: number;
  /** Mean distance of each bin's pixels, nm; negative insulating. */
  readonly distanceNm: Float64Array;
  readonly value: Float64Array;
  /** Covariance of the values, count × count. */
  readonly covariance: Float64Array;
  /** Largest distance with a bin, per side, 0 where there is none. */
  readonly reachInsulatingNm: number;
  readonly reachMetallicNm: number;
}

/** A bin with fewer pixels is left out. */
const LEAST_PIXELS = 3;

/** Bins a stretch's pixels by distance and works out the covariance of the bins pixel by pixel: neighbours' correlation and what the
 *  pixels of a row share, as measured in the frame, at the places where this stretch's pixels lie. */
export class Profiler {
  private readonly slot: Int16Array;

  constructor(
    private readonly grid: Grid,
    private readonly binNm: number,
    private readonly reachNm: number,
    private readonly nearWallNm: number,
    private readonly noise: NoiseModel,
  ) {
    this.slot = new Int16Array(grid.across.length).fill(-1);
  }

  profile(stretch: Stretch): Profile {
    const { binNm, slot } = this;
    const { across, distanceNm } = this.grid;
    const half = Math.ceil(this.reachNm / binNm);
    const many = new Int32Array(2 * half);
    const sum = new Float64Array(2 * half);
    const sumD = new Float64Array(2 * half);
    for (const p of stretch.pixels) {
      const b = Math.floor(distanceNm[p] / binNm) + half;
      if (b < 0 || b >= 2 * half) continue;
      many[b]++;
      sum[b] += across[p];
      sumD[b] += distanceNm[p];
    }
    const index = new Int32Array(2 * half).fill(-1);
    let count = 0;
    for (let b = 0; b < 2 * half; b++) if (many[b] >= LEAST_PIXELS) index[b] = count++;
    const value = new Float64Array(count);
    const distance = new Float64Array(count);
    const pixels = new Float64Array(count);
    for (let b = 0; b < 2 * half; b++) {
      if (index[b] < 0) continue;
      value[index[b]] = sum[b] / many[b];
      distance[index[b]] = sumD[b] / many[b];
      pixels[index[b]] = many[b];
    }
    const kept: number[] = [];
    for (const p of stretch.pixels) {
      const b = Math.floor(distanceNm[p] / binNm) + half;
      if (b < 0 || b >= 2 * half || index[b] < 0) continue;
      slot[p] = index[b];
      kept.push(p);
    }
    const covariance = this.covariance(kept, distance, pixels);
    for (const p of kept) slot[p] = -1;
    return {
      count,
      distanceNm: distance,
      value,
      covariance,
      reachInsulatingNm: count > 0 ? Math.max(0, -distance[0]) : 0,
      reachMetallicNm: count > 0 ? Math.max(0, distance[count - 1]) : 0,
    };
  }

  private covariance(kept: readonly number[], distance: Float64Array, pixels: Float64Array): Float64Array {
    const { slot, noise } = this;
    const { rows, cols, distanceNm } = this.grid;
    const count = pixels.length;
    const c = new Float64Array(count * count);
    const sd = (p: number): number => noise.local.sd(distanceNm[p]);
    const lags: { dy: number; dx: number; rho: number }[] = [];
    for (let dy = 0; dy <= NEAR_LAG; dy++) {
      for (let dx = -NEAR_LAG; dx <= NEAR_LAG; dx++) {
        if (dy === 0 && dx <= 0) continue;
        const rho = noise.near[dy][dx + NEAR_LAG];
        if (rho !== 0) lags.push({ dy, dx, rho });
      }
    }
    for (const p of kept) {
      const a = slot[p];
      const j = p % cols;
      const s = sd(p);
      c[a * count + a] += s * s;
      for (const { dy, dx, rho } of lags) {
        const q = p + dy * cols + dx;
        if (j + dx < 0 || j + dx >= cols || q >= rows * cols || slot[q] < 0) continue;
        const v = rho * s * sd(q);
        const b = slot[q];
        c[a * count + b] += v;
        c[b * count + a] += v;
      }
    }
    this.addRows(kept, distance, c);
    for (let a = 0; a < count; a++) for (let b = 0; b < count; b++) c[a * count + b] /= pixels[a] * pixels[b];
    return c;
  }

  /** Σ over pairs of pixels of one row (and of rows near each other) of what they share; a bin lies wholly in few rows or in many. */
  private addRows(kept: readonly number[], distance: Float64Array, c: Float64Array): void {
    const { slot, noise, nearWallNm } = this;
    const { cols, distanceNm } = this.grid;
    const count = distance.length;
    if (kept.length === 0) return;
    // Per row and bin how far a turn, and a stretch, of all its pixels moves their sum; `kept` goes from row to row.
    const top = Math.floor(kept[0] / cols);
    const lines = Math.floor(kept[kept.length - 1] / cols) - top + 1;
    const turn = new Float64Array(lines * count);
    const stretch = new Float64Array(lines * count);
    const met: number[][] = Array.from({ length: lines }, () => []);
    for (const p of kept) {
      const i = Math.floor(p / cols) - top;
      const at = i * count + slot[p];
      if (stretch[at] === 0 && turn[at] === 0) met[i].push(slot[p]);
      turn[at] += noise.local.along(distanceNm[p]);
      stretch[at] += noise.local.chord.height;
    }
    const group = Array.from(distance, (d) => (Math.abs(d) > nearWallNm ? 1 : 0));
    for (let i = 0; i < lines; i++) {
      const at = i * count;
      for (const a of met[i]) {
        for (const b of met[i]) {
          const moved = turn[at + a] * turn[at + b] + stretch[at + a] * stretch[at + b];
          c[a * count + b] += moved * noise.rows.same[2 * group[a] + group[b]];
        }
      }
      for (let lag = 1; lag <= ROW_LAG && i + lag < lines; lag++) {
        const shared = noise.rows.apart[lag];
        if (shared === 0) continue;
        const below = (i + lag) * count;
        for (const a of met[i]) {
          for (const b of met[i + lag]) {
            const v = shared * (turn[at + a] * turn[below + b] + stretch[at + a] * stretch[below + b]);
            c[a * count + b] += v;
            c[b * count + a] += v;
          }
        }
      }
    }
  }
}
