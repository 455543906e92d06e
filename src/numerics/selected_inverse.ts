import { zeroBlocks, type BlockFactor, type BlockMatrix } from "./block_factor.js";

/** Diagonal 2 × 2 blocks of K = A⁻¹ and of K M K, four numbers a node, for M with entries only where the factor of A has them.
 *
 *  The entries of K in the places of the factor follow from one another, last column first, without any other entry: of A = L D Lᵀ,
 *  K = D⁻¹L⁻¹ + (1 − Lᵀ) K. K M K is the derivative of K as A falls by M, so the same recursion, differentiated, gives it: no row of
 *  K is ever needed whole, and the cost is a few times that of the factor.
 *  @param m spoilt
 *  Source: Takahashi, Fagan & Chin 1973, Proc. 8th PICA Conf., 63; Erisman & Tinney 1975, Commun. ACM 18, 177. */
export function selectedInverse(factor: BlockFactor, m: BlockMatrix): { inverse: Float64Array; product: Float64Array } {
  const { pattern, diagonal: d, below: l, inverse: i } = factor;
  const { nodes, start, rows, node } = pattern;
  const { diagonal: dd, below: dl } = derivative(factor, m);
  const z = zeroBlocks(pattern);
  const dz = zeroBlocks(pattern);
  const where = new Int32Array(nodes);
  for (let j = nodes - 1; j >= 0; j--) {
    const end = start[j + 1];
    for (let b = start[j]; b < end; b++) {
      const c = rows[b];
      for (let e = start[c]; e < start[c + 1]; e++) where[rows[e]] = e;
      // Z of column j is −Z L: the block (c, c) first, then what lies below it in column c, for both halves of the symmetric Z
      minusProduct(z.below, b, z.diagonal, c, l, b);
      minusProduct(dz.below, b, dz.diagonal, c, l, b);
      minusProduct(dz.below, b, z.diagonal, c, dl, b);
      for (let a = b + 1; a < end; a++) {
        const e = where[rows[a]];
        minusProduct(z.below, a, z.below, e, l, b);
        minusProduct(dz.below, a, dz.below, e, l, b);
        minusProduct(dz.below, a, z.below, e, dl, b);
        minusTransposed(z.below, b, z.below, e, l, a);
        minusTransposed(dz.below, b, dz.below, e, l, a);
        minusTransposed(dz.below, b, z.below, e, dl, a);
      }
    }
    // D⁻¹, and its derivative −D⁻¹ dD D⁻¹
    const j4 = 4 * j;
    z.diagonal.set(i.subarray(j4, j4 + 4), j4);
    const s0 = i[j4] * dd[j4] + i[j4 + 1] * dd[j4 + 2];
    const s1 = i[j4] * dd[j4 + 1] + i[j4 + 1] * dd[j4 + 3];
    const s2 = i[j4 + 2] * dd[j4] + i[j4 + 3] * dd[j4 + 2];
    const s3 = i[j4 + 2] * dd[j4 + 1] + i[j4 + 3] * dd[j4 + 3];
    dz.diagonal[j4] = -(s0 * i[j4] + s1 * i[j4 + 2]);
    dz.diagonal[j4 + 1] = -(s0 * i[j4 + 1] + s1 * i[j4 + 3]);
    dz.diagonal[j4 + 2] = -(s2 * i[j4] + s3 * i[j4 + 2]);
    dz.diagonal[j4 + 3] = -(s2 * i[j4 + 1] + s3 * i[j4 + 3]);
    for (let e = start[j]; e < end; e++) {
      minusTransposed(z.diagonal, j, z.below, e, l, e);
      minusTransposed(dz.diagonal, j, dz.below, e, l, e);
      minusTransposed(dz.diagonal, j, z.below, e, dl, e);
    }
  }
  const inverse = new Float64Array(d.length);
  const product = new Float64Array(d.length);
  for (let p = 0; p < nodes; p++) {
    inverse.set(z.diagonal.subarray(4 * p, 4 * p + 4), 4 * node[p]);
    product.set(dz.diagonal.subarray(4 * p, 4 * p + 4), 4 * node[p]);
  }
  return { inverse, product };
}

/** Derivatives of D and L as A falls by m, in the memory of m. */
function derivative(factor: BlockFactor, m: BlockMatrix): BlockMatrix {
  const { nodes, start, rows, rowStart, entry, column } = factor.pattern;
  const { diagonal: d, below: l, inverse } = factor;
  const { diagonal: dd, below: dl } = m;
  for (let q = 0; q < dd.length; q++) dd[q] = -dd[q];
  for (let q = 0; q < dl.length; q++) dl[q] = -dl[q];
  const where = new Int32Array(nodes);
  // D Lᵀ of a row, and its derivative
  const t = new Float64Array(4);
  const dt = new Float64Array(4);
  for (let k = 0; k < nodes; k++) {
    for (let e = start[k]; e < start[k + 1]; e++) where[rows[e]] = e;
    for (let r = rowStart[k]; r < rowStart[k + 1]; r++) {
      const e0 = entry[r];
      const j = column[r];
      t.fill(0);
      dt.fill(0);
      minusByTransposed(t, d, j, l, e0);
      minusByTransposed(dt, dd, j, l, e0);
      minusByTransposed(dt, d, j, dl, e0);
      // t and dt hold the negative
      plusProduct(dd, k, dl, e0, t);
      plusProduct(dd, k, l, e0, dt);
      for (let e = e0 + 1; e < start[j + 1]; e++) {
        const to = where[rows[e]];
        plusProduct(dl, to, dl, e, t);
        plusProduct(dl, to, l, e, dt);
      }
    }
    const i = inverse.subarray(4 * k, 4 * k + 4);
    for (let e = start[k]; e < start[k + 1]; e++) {
      minusProduct(dl, e, l, e, dd, k);
      for (let q = 4 * e; q < 4 * e + 4; q += 2) {
        const [x, y] = [dl[q], dl[q + 1]];
        dl[q] = x * i[0] + y * i[2];
        dl[q + 1] = x * i[1] + y * i[3];
      }
    }
  }
  return m;
}

/** Block o of `out` less block a of `x` times block b of `y`. */
function minusProduct(out: Float64Array, o: number, x: Float64Array, a: number, y: Float64Array, b: number): void {
  const [p, q, r] = [4 * o, 4 * a, 4 * b];
  out[p] -= x[q] * y[r] + x[q + 1] * y[r + 2];
  out[p + 1] -= x[q] * y[r + 1] + x[q + 1] * y[r + 3];
  out[p + 2] -= x[q + 2] * y[r] + x[q + 3] * y[r + 2];
  out[p + 3] -= x[q + 2] * y[r + 1] + x[q + 3] * y[r + 3];
}

/** The same with the transpose of the block of `x`. */
function minusTransposed(out: Float64Array, o: number, x: Float64Array, a: number, y: Float64Array, b: number): void {
  const [p, q, r] = [4 * o, 4 * a, 4 * b];
  out[p] -= x[q] * y[r] + x[q + 2] * y[r + 2];
  out[p + 1] -= x[q] * y[r + 1] + x[q + 2] * y[r + 3];
  out[p + 2] -= x[q + 1] * y[r] + x[q + 3] * y[r + 2];
  out[p + 3] -= x[q + 1] * y[r + 1] + x[q + 3] * y[r + 3];
}

/** The block `out` less block a of `x` times the transpose of block b of `y`. */
function minusByTransposed(out: Float64Array, x: Float64Array, a: number, y: Float64Array, b: number): void {
  const [q, r] = [4 * a, 4 * b];
  out[0] -= x[q] * y[r] + x[q + 1] * y[r + 1];
  out[1] -= x[q] * y[r + 2] + x[q + 1] * y[r + 3];
  out[2] -= x[q + 2] * y[r] + x[q + 3] * y[r + 1];
  out[3] -= x[q + 2] * y[r + 2] + x[q + 3] * y[r + 3];
}

function plusProduct(out: Float64Array, o: number, x: Float64Array, a: number, y: Float64Array): void {
  const [p, q] = [4 * o, 4 * a];
  out[p] += x[q] * y[0] + x[q + 1] * y[2];
  out[p + 1] += x[q] * y[1] + x[q + 1] * y[3];
  out[p + 2] += x[q + 2] * y[0] + x[q + 3] * y[2];
  out[p + 3] += x[q + 2] * y[1] + x[q + 3] * y[3];
}
