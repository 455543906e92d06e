/** Assignment of rows to columns with the largest total weight, each row and column used at most once; weights ≤ 0 are never
 *  assigned. Hungarian method with potentials, O(n³) (Kuhn 1955, Naval Res. Logist. Q. 2, 83).
 *  @param weight row-major rows × cols
 *  @returns for each row its column, or −1 */
export function largestAssignment(weight: ArrayLike<number>, rows: number, cols: number): Int32Array {
  const n = Math.max(rows, cols);
  const cost = (i: number, j: number): number => (i < rows && j < cols ? -Math.max(0, weight[i * cols + j]) : 0);
  // 1-based potentials and matches; column 0 is a helper that stands for the row being placed.
  const u = new Float64Array(n + 1);
  const v = new Float64Array(n + 1);
  const rowOf = new Int32Array(n + 1);
  const from = new Int32Array(n + 1);
  for (let i = 1; i <= n; i++) {
    rowOf[0] = i;
    let j0 = 0;
    const least = new Float64Array(n + 1).fill(Infinity);
    const used = new Uint8Array(n + 1);
    do {
      used[j0] = 1;
      const i0 = rowOf[j0];
      let delta = Infinity;
      let next = 0;
      for (let j = 1; j <= n; j++) {
        if (used[j] === 1) continue;
        const reduced = cost(i0 - 1, j - 1) - u[i0] - v[j];
        if (reduced < least[j]) {
          least[j] = reduced;
          from[j] = j0;
        }
        if (least[j] < delta) {
          delta = least[j];
          next = j;
        }
      }
      for (let j = 0; j <= n; j++) {
        if (used[j] === 1) {
          u[rowOf[j]] += delta;
          v[j] -= delta;
        } else least[j] -= delta;
      }
      j0 = next;
    } while (rowOf[j0] !== 0);
    while (j0 !== 0) {
      rowOf[j0] = rowOf[from[j0]];
      j0 = from[j0];
    }
  }
  const out = new Int32Array(rows).fill(-1);
  for (let j = 1; j <= cols; j++) {
    const i = rowOf[j] - 1;
    if (i >= 0 && i < rows && weight[i * cols + j - 1] > 0) out[i] = j - 1;
  }
  return out;
}
