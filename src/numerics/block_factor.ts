import type { EliminationOrder } from "./elimination_order.js";

/** A symmetric matrix of 2 × 2 blocks, or what is computed from one, in the places of its factor's entries: blocks row-major, four numbers each. */
export interface BlockMatrix {
  /** Block (p, p) of place p from 4p on. */
  readonly diagonal: Float64Array;
  /** Block (rows[e], p) of entry e of column p from 4e on. */
  readonly below: Float64Array;
}

/** An order of elimination with the entries of each row. */
export interface BlockPattern extends EliminationOrder {
  /** Row r of the factor has the entries entry[rowStart[r]] …, in the columns column[rowStart[r]] …, ascending. */
  readonly rowStart: Int32Array;
  readonly entry: Int32Array;
  readonly column: Int32Array;
}

/** A = L D Lᵀ: D the diagonal blocks, L with unit blocks on its diagonal below. */
export interface BlockFactor extends BlockMatrix {
  readonly pattern: BlockPattern;
  /** D⁻¹, four numbers a place. */
  readonly inverse: Float64Array;
}

export function blockPattern(order: EliminationOrder): BlockPattern {
  const { nodes, start, rows } = order;
  const rowStart = new Int32Array(nodes + 1);
  for (const r of rows) rowStart[r + 1]++;
  for (let r = 0; r < nodes; r++) rowStart[r + 1] += rowStart[r];
  const entry = new Int32Array(rows.length);
  const column = new Int32Array(rows.length);
  const next = rowStart.slice();
  for (let p = 0; p < nodes; p++) {
    for (let e = start[p]; e < start[p + 1]; e++) {
      const at = next[rows[e]]++;
      entry[at] = e;
      column[at] = p;
    }
  }
  return { ...order, rowStart, entry, column };
}

export function zeroBlocks(pattern: EliminationOrder): BlockMatrix {
  return { diagonal: new Float64Array(4 * pattern.nodes), below: new Float64Array(4 * pattern.rows.length) };
}

/** Adds ± the block x to block (u, v) of a symmetric matrix and its transpose to block (v, u); u = v: both to the same block.
 *  @param u, v nodes that share a clique of the order
 *  @throws RangeError where they share none */
export function addBlock(
  to: BlockMatrix,
  order: EliminationOrder,
  u: number,
  v: number,
  sign: number,
  x: readonly [number, number, number, number],
): void {
  const p = order.place[u];
  const q = order.place[v];
  if (p === q) {
    const off = sign * (x[1] + x[2]);
    to.diagonal[4 * p] += 2 * sign * x[0];
    to.diagonal[4 * p + 1] += off;
    to.diagonal[4 * p + 2] += off;
    to.diagonal[4 * p + 3] += 2 * sign * x[3];
    return;
  }
  const at = 4 * entryOf(order, Math.max(p, q), Math.min(p, q));
  to.below[at] += sign * x[0];
  to.below[at + 1] += sign * (p > q ? x[1] : x[2]);
  to.below[at + 2] += sign * (p > q ? x[2] : x[1]);
  to.below[at + 3] += sign * x[3];
}

function entryOf(order: EliminationOrder, row: number, column: number): number {
  let low = order.start[column];
  let high = order.start[column + 1] - 1;
  while (low < high) {
    const middle = (low + high) >> 1;
    if (order.rows[middle] < row) low = middle + 1;
    else high = middle;
  }
  if (order.rows[low] !== row) throw new RangeError(`no entry (${row}, ${column}) in the pattern of the factor`);
  return low;
}

/** Factor of a symmetric positive definite matrix, in its own memory. null where it is not positive definite to working precision; it
 *  is then spoilt. Costs the sum over the columns of the square of their length. */
export function factorBlocks(matrix: BlockMatrix, pattern: BlockPattern): BlockFactor | null {
  const { nodes, start, rows, rowStart, entry, column } = pattern;
  const { diagonal: d, below: l } = matrix;
  const inverse = new Float64Array(4 * nodes);
  const where = new Int32Array(nodes);
  for (let k = 0; k < nodes; k++) {
    for (let e = start[k]; e < start[k + 1]; e++) where[rows[e]] = 4 * e;
    const k4 = 4 * k;
    const [first, second] = [d[k4], d[k4 + 3]];
    for (let t = rowStart[k]; t < rowStart[k + 1]; t++) {
      const e0 = 4 * entry[t];
      const j = 4 * column[t];
      // D Lᵀ of this row
      const t00 = d[j] * l[e0] + d[j + 1] * l[e0 + 1];
      const t01 = d[j] * l[e0 + 2] + d[j + 1] * l[e0 + 3];
      const t10 = d[j + 2] * l[e0] + d[j + 3] * l[e0 + 1];
      const t11 = d[j + 2] * l[e0 + 2] + d[j + 3] * l[e0 + 3];
      d[k4] -= l[e0] * t00 + l[e0 + 1] * t10;
      d[k4 + 1] -= l[e0] * t01 + l[e0 + 1] * t11;
      d[k4 + 3] -= l[e0 + 2] * t01 + l[e0 + 3] * t11;
      const end = start[column[t] + 1];
      for (let q = entry[t] + 1; q < end; q++) {
        const e = 4 * q;
        const to = where[rows[q]];
        l[to] -= l[e] * t00 + l[e + 1] * t10;
        l[to + 1] -= l[e] * t01 + l[e + 1] * t11;
        l[to + 2] -= l[e + 2] * t00 + l[e + 3] * t10;
        l[to + 3] -= l[e + 2] * t01 + l[e + 3] * t11;
      }
    }
    d[k4 + 2] = d[k4 + 1];
    // what is left of the diagonal must stand above the noise of the subtraction
    const rest = d[k4 + 3] - (d[k4 + 1] * d[k4 + 1]) / d[k4];
    if (!(d[k4] > first * 4e-16) || !(rest > second * 4e-16) || d[k4] === Infinity || rest === Infinity) return null;
    const determinant = d[k4] * rest;
    const i00 = d[k4 + 3] / determinant;
    const i01 = -d[k4 + 1] / determinant;
    const i11 = 1 / rest;
    inverse.set([i00, i01, i01, i11], k4);
    for (let e = 4 * start[k]; e < 4 * start[k + 1]; e += 2) {
      const a = l[e];
      const b = l[e + 1];
      l[e] = a * i00 + b * i01;
      l[e + 1] = a * i01 + b * i11;
    }
  }
  return { pattern, diagonal: d, below: l, inverse };
}

/** Solves A x = b, two numbers a node, in place of `b`. */
export function solveBlocks(factor: BlockFactor, b: Float64Array): void {
  const { nodes, start, rows, node } = factor.pattern;
  const { below: l, inverse: i } = factor;
  for (let p = 0; p < nodes; p++) {
    const x = b[2 * node[p]];
    const y = b[2 * node[p] + 1];
    for (let e = start[p]; e < start[p + 1]; e++) {
      const to = 2 * node[rows[e]];
      b[to] -= l[4 * e] * x + l[4 * e + 1] * y;
      b[to + 1] -= l[4 * e + 2] * x + l[4 * e + 3] * y;
    }
  }
  for (let p = nodes - 1; p >= 0; p--) {
    const at = 2 * node[p];
    let x = i[4 * p] * b[at] + i[4 * p + 1] * b[at + 1];
    let y = i[4 * p + 2] * b[at] + i[4 * p + 3] * b[at + 1];
    for (let e = start[p]; e < start[p + 1]; e++) {
      const from = 2 * node[rows[e]];
      x -= l[4 * e] * b[from] + l[4 * e + 2] * b[from + 1];
      y -= l[4 * e + 1] * b[from] + l[4 * e + 3] * b[from + 1];
    }
    b[at] = x;
    b[at + 1] = y;
  }
}
