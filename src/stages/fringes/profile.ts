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
  /** Pixels of the stretch at hand by row and bin. */
  private pixelsOf = new Float64Array(0);

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
    let inside = 0;
    const pixelsKept = new Int32Array(stretch.pixels.length);
    for (const p of stretch.pixels) {
      const b = Math.floor(distanceNm[p] / binNm) + half;
      if (b < 0 || b >= 2 * half || index[b] < 0) continue;
      slot[p] = index[b];
      pixelsKept[inside++] = p;
    }
    const kept = pixelsKept.subarray(0, inside);
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

  private covariance(kept: Int32Array, distance: Float64Array, pixels: Float64Array): Float64Array {
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
        // The lower triangle; a pair within one bin counts twice on the diagonal.
        if (a > b) c[a * count + b] += v;
        else c[b * count + a] += a === b ? 2 * v : v;
      }
    }
    this.addRows(kept, distance, c);
    for (let a = 0; a < count; a++) {
      for (let b = 0; b <= a; b++) {
        c[a * count + b] /= pixels[a] * pixels[b];
        c[b * count + a] = c[a * count + b];
      }
    }
    return c;
  }

  /** Σ over pairs of pixels of one row (and of rows near each other) of what they share, into the lower triangle; a bin lies wholly in few rows or in many. */
  private addRows(kept: Int32Array, distance: Float64Array, c: Float64Array): void {
    const { slot, noise, nearWallNm } = this;
    const { cols } = this.grid;
    const count = distance.length;
    if (kept.length === 0) return;
    const { same, apart } = noise.rows;
    const apartToo = apart.some((v) => v !== 0);
    if (!apartToo && same.every((v) => v === 0)) return;
    // `kept` goes from row to row.
    const top = Math.floor(kept[0] / cols);
    const lines = Math.floor(kept[kept.length - 1] / cols) - top + 1;
    if (this.pixelsOf.length < lines * count) this.pixelsOf = new Float64Array(lines * count);
    const { pixelsOf } = this;
    pixelsOf.fill(0, 0, lines * count);
    for (let k = 0, line = top, end = (top + 1) * cols; k < kept.length; k++) {
      const p = kept[k];
      while (p >= end) {
        line++;
        end += cols;
      }
      pixelsOf[(line - top) * count + slot[p]]++;
    }
    // Numbers of pairs of pixels of two bins in one row, and in rows near each other with what such rows share.
    const pairs = new Float64Array(count * count);
    const below = new Float64Array(count);
    const pairsApart = apartToo ? new Float64Array(count * count) : pairs;
    for (let i = 0; i < lines; i++) {
      const own = pixelsOf.subarray(i * count, (i + 1) * count);
      let from = 0;
      while (from < count && own[from] === 0) from++;
      let to = count - 1;
      while (to >= from && own[to] === 0) to--;
      for (let a = from; a <= to; a++) {
        const n = own[a];
        if (n === 0) continue;
        const line = a * count;
        for (let b = from; b <= a; b++) pairs[line + b] += n * own[b];
      }
      if (!apartToo || to < from) continue;
      below.fill(0);
      for (let lag = 1; lag <= ROW_LAG && i + lag < lines; lag++) {
        if (apart[lag] === 0) continue;
        const other = (i + lag) * count;
        for (let b = 0; b < count; b++) below[b] += apart[lag] * pixelsOf[other + b];
      }
      for (let a = 0; a < count; a++) {
        const n = own[a];
        const m = below[a];
        if (n === 0 && m === 0) continue;
        const line = a * count;
        for (let b = 0; b <= a; b++) pairsApart[line + b] += n * below[b] + m * own[b];
      }
    }
    // How far a turn moves a pixel of each bin; a stretch moves all alike.
    const along = distance.map((d) => noise.local.along(d));
    const height2 = noise.local.chord.height ** 2;
    const far = Uint8Array.from(distance, (d) => (Math.abs(d) > nearWallNm ? 1 : 0));
    for (let a = 0; a < count; a++) {
      for (let b = 0; b <= a; b++) {
        const at = a * count + b;
        const moved = along[a] * along[b] + height2;
        c[at] += moved * (pairs[at] * same[2 * far[a] + far[b]] + (apartToo ? pairsApart[at] : 0));
      }
    }
  }
}
