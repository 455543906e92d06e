import { choleskyInPlace, choleskySolve } from "../../numerics/cholesky.js";
import type { Grid } from "./grid.js";
import type { Local } from "./local.js";

/** What a row's phase (rad) and log gain may still be off by before anything is known of this frame's rows, 1 sd. */
const FIRST_SD = 0.03;
/** How often that is taken from the rows found and the rows are found again. */
const ROUNDS = 2;

export interface ReferencedRows {
  readonly across: Float32Array;
  /** By how much the rows were off in phase (rad) and log gain, 1 sd; Infinity where they could not be found: `across` is then as it was. */
  readonly sdRad: number;
}

/** The component across the chord with the rows referenced anew beside what stands at each distance from the walls.
 *
 *  Rows get their phase and gain from the pixels away from walls, and a fringe is still there: a row takes the mean of its fringe for its
 *  own offset, and the fringe comes out weaker than it is where rows see little else. Here both are found together, by weighted least squares:
 *  a mean profile of the whole frame, free in every bin of distance, and two offsets a row with a normal prior whose variance comes from
 *  the rows themselves (mixed model: Henderson 1975, Biometrics 31, 423; variance by expectation and maximisation, Dempster, Laird & Rubin
 *  1977, J. R. Stat. Soc. B 39, 1). What rows and profile could both be, walls along the rows, goes to the profile. The array given is left as it is. */
export function referenceRows(grid: Grid, local: Local, binNm: number, reachNm: number): ReferencedRows {
  const { across, distanceNm, trusted, rows, cols } = grid;
  const half = Math.ceil(reachNm / binNm);
  const bins = 2 * half;
  const binOf = (d: number): number => Math.max(0, Math.min(bins - 1, Math.floor(d / binNm) + half));
  // Per row and bin the number of pixels and the sum of their values; within a bin all pixels count alike.
  const many = new Float64Array(rows * bins);
  const sum = new Float64Array(rows * bins);
  for (let i = 0, p = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, p++) {
      if (trusted[p] === 0) continue;
      const at = i * bins + binOf(distanceNm[p]);
      many[at]++;
      sum[at] += across[p];
    }
  }
  const height = local.chord.height;
  const along = Float64Array.from({ length: bins }, (_, b) => local.along((b + 0.5 - half) * binNm));
  const weight = Float64Array.from({ length: bins }, (_, b) => local.sd((b + 0.5 - half) * binNm) ** -2);

  const offsets = new Float64Array(2 * rows);
  let variance = FIRST_SD ** 2;
  for (let round = 0; round < ROUNDS; round++) {
    const found = solve(many, sum, along, weight, height, rows, bins, 1 / variance, offsets);
    if (found === null) return { across, sdRad: Infinity };
    variance = found;
  }
  const out = Float32Array.from(across);
  for (let i = 0, p = 0; i < rows; i++) {
    const turn = offsets[2 * i];
    const gain = offsets[2 * i + 1] * height;
    for (let j = 0; j < cols; j++, p++) if (trusted[p] === 1) out[p] -= turn * local.along(distanceNm[p]) + gain;
  }
  return { across: out, sdRad: Math.sqrt(variance) };
}

/** Fills `offsets` (phase, log gain of each row); returns the mean of their squares with their own variance added, null where there is no solution. */
function solve(
  many: Float64Array,
  sum: Float64Array,
  along: Float64Array,
  weight: Float64Array,
  height: number,
  rows: number,
  bins: number,
  precision: number,
  offsets: Float64Array,
): number | null {
  const normal = new Float64Array(bins * bins);
  const right = new Float64Array(bins);
  const met = new Int32Array(bins);
  const turned = new Float64Array(bins);
  const raised = new Float64Array(bins);
  /** Per row: the inverse 2 × 2 matrix (3 numbers) and the right side (2). */
  const kept = new Float64Array(5 * rows);
  for (let i = 0; i < rows; i++) {
    let [zz, zh, hh, cz, ch] = [precision, 0, precision, 0, 0];
    let count = 0;
    for (let b = 0; b < bins; b++) {
      const n = many[i * bins + b];
      if (n === 0) continue;
      met[count++] = b;
      const nw = n * weight[b];
      const sw = sum[i * bins + b] * weight[b];
      zz += nw * along[b] * along[b];
      zh += nw * along[b] * height;
      hh += nw * height * height;
      cz += sw * along[b];
      ch += sw * height;
      normal[b * bins + b] += nw;
      right[b] += sw;
    }
    const det = zz * hh - zh * zh;
    const [izz, izh, ihh] = [hh / det, -zh / det, zz / det];
    kept.set([izz, izh, ihh, cz, ch], 5 * i);
    for (let t = 0; t < count; t++) {
      const b = met[t];
      const nw = many[i * bins + b] * weight[b];
      turned[t] = nw * (izz * along[b] + izh * height);
      raised[t] = nw * (izh * along[b] + ihh * height);
      right[b] -= turned[t] * cz + raised[t] * ch;
    }
    for (let t = 0; t < count; t++) {
      const line = met[t] * bins;
      for (let u = 0; u <= t; u++) {
        const nw = many[i * bins + met[u]] * weight[met[u]];
        normal[line + met[u]] -= nw * (turned[t] * along[met[u]] + raised[t] * height);
      }
    }
  }
  // A bin without pixels has no mean.
  for (let b = 0; b < bins; b++) if (normal[b * bins + b] === 0) normal[b * bins + b] = 1;
  if (!choleskyInPlace(normal, bins)) return null;
  choleskySolve(normal, bins, right);
  let squares = 0;
  let seen = 0;
  for (let i = 0; i < rows; i++) {
    const [izz, izh, ihh] = kept.subarray(5 * i, 5 * i + 3);
    let [cz, ch] = kept.subarray(5 * i + 3, 5 * i + 5);
    for (let b = 0; b < bins; b++) {
      const nw = many[i * bins + b] * weight[b];
      cz -= nw * along[b] * right[b];
      ch -= nw * height * right[b];
    }
    const turn = izz * cz + izh * ch;
    const gain = izh * cz + ihh * ch;
    offsets[2 * i] = turn;
    offsets[2 * i + 1] = gain;
    if (izz * precision > 0.999) continue;
    squares += turn * turn + gain * gain + izz + ihh;
    seen += 2;
  }
  return seen > 0 ? squares / seen : null;
}
