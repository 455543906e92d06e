/** Number of connected regions of `state` with at least `leastPx` pixels, among pixels whose `usable` is 1; neighbours over sides only
 *  (4) or over corners too (8). */
export function countDomains(
  states: Uint8Array,
  usable: Uint8Array,
  rows: number,
  cols: number,
  state: number,
  neighbours: 4 | 8,
  leastPx: number,
): number {
  const seen = new Uint8Array(rows * cols);
  const stack = new Int32Array(rows * cols);
  let count = 0;
  for (let start = 0; start < rows * cols; start++) {
    if (seen[start] === 1 || usable[start] === 0 || states[start] !== state) continue;
    let size = 0;
    let top = 0;
    stack[top++] = start;
    seen[start] = 1;
    while (top > 0) {
      const at = stack[--top];
      size++;
      const i = Math.floor(at / cols);
      const j = at - i * cols;
      for (let r = Math.max(0, i - 1); r <= Math.min(rows - 1, i + 1); r++) {
        for (let c = Math.max(0, j - 1); c <= Math.min(cols - 1, j + 1); c++) {
          if (neighbours === 4 && r !== i && c !== j) continue;
          const k = r * cols + c;
          if (seen[k] === 1 || usable[k] === 0 || states[k] !== state) continue;
          seen[k] = 1;
          stack[top++] = k;
        }
      }
    }
    if (size >= leastPx) count++;
  }
  return count;
}
