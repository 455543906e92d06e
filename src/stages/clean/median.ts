/** Median of the first `n` values, which are rearranged (Hoare 1961, Commun. ACM 4, 321: selection); of an even number the mean
 *  of the middle two. NaN of nothing. In place, since it runs once or twice a row of every frame. */
export function medianInPlace(a: Float64Array, n: number): number {
  if (n === 0) return Number.NaN;
  const half = n >> 1;
  const upper = select(a, n, half);
  if (n % 2 === 1) return upper;
  let lower = a[0];
  for (let k = 1; k < half; k++) if (a[k] > lower) lower = a[k];
  return 0.5 * (lower + upper);
}

export const medianOf = (values: ArrayLike<number>): number => medianInPlace(Float64Array.from(values), values.length);

/** The k-th smallest of the first n; smaller ones end up before it. */
function select(a: Float64Array, n: number, k: number): number {
  let left = 0;
  let right = n - 1;
  while (left < right) {
    const pivot = a[(left + right) >> 1];
    let i = left;
    let j = right;
    while (i <= j) {
      while (a[i] < pivot) i++;
      while (a[j] > pivot) j--;
      if (i <= j) {
        const t = a[i];
        a[i++] = a[j];
        a[j--] = t;
      }
    }
    if (k <= j) right = j;
    else if (k >= i) left = i;
    else break;
  }
  return a[k];
}
