import { shortWay } from "./noise.js";

/** Most columns a group, and fewest groups a row: what rows are compared by is smooth over so many pixels, and as many groups as these keep
 *  a median robust. */
const MOST_COLUMNS = 3;
const LEAST_GROUPS = 128;

/** Means over groups of neighbouring columns, row by row. Rows are compared by these: a mean over a row's groups is as good as one over its
 *  pixels, and there are fewer of them. */
export interface ColumnGroups {
  readonly rows: number;
  /** Groups a row. */
  readonly cols: number;
  /** Columns a group; the last one may have fewer. */
  readonly each: number;
  /** Row-major [rows, cols]; NaN where less than half of a group was measured. */
  readonly values: Float32Array;
  /** Pixels that a mean is of. */
  readonly counts: Uint8Array;
}

export function groupColumns(values: Float32Array, rows: number, cols: number, isAngle: boolean): ColumnGroups {
  const each = Math.max(1, Math.min(MOST_COLUMNS, Math.floor(cols / LEAST_GROUPS)));
  const across = Math.ceil(cols / each);
  const means = new Float32Array(rows * across);
  const counts = new Uint8Array(rows * across);
  for (let i = 0, g = 0; i < rows; i++) {
    const end = (i + 1) * cols;
    for (let p = i * cols; p < end; p += each, g++) {
      const to = p + each < end ? p + each : end;
      let sum = 0;
      let n = 0;
      let first = 0;
      for (let q = p; q < to; q++) {
        const v = values[q];
        if (Number.isNaN(v)) continue;
        if (n++ === 0) first = v;
        else sum += isAngle ? shortWay(v - first) : v - first;
      }
      counts[g] = n;
      means[g] = n > 0 && 2 * n >= to - p ? first + sum / n : Number.NaN;
    }
  }
  return { rows, cols: across, each, values: means, counts };
}

/** Logarithms of the means, NaN where they are not above 0. */
export function logOf(groups: ColumnGroups): ColumnGroups {
  const values = new Float32Array(groups.values.length);
  for (let p = 0; p < values.length; p++) values[p] = groups.values[p] > 0 ? Math.log(groups.values[p]) : Number.NaN;
  return { ...groups, values };
}
