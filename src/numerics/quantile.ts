/** √2·erf⁻¹(½) inverted: a normal sample's median absolute deviation times this is its standard deviation. */
export const SD_PER_MAD = 1.482602218505602;

/** The k-th smallest (from 0) of the first `n` values of `a`, which is reordered so that nothing before k is larger and nothing
 *  after it smaller. No NaN allowed. Quickselect with Floyd & Rivest's sampling (1975, Commun. ACM 18, 165). */
export function selectInPlace(a: Float64Array | Float32Array, k: number, n = a.length): number {
  if (!(k >= 0 && k < n)) throw new RangeError(`element ${k} of ${n}`);
  select(a, k, 0, n - 1);
  return a[k];
}

function select(a: Float64Array | Float32Array, k: number, left: number, right: number): void {
  while (right > left) {
    if (right - left > 600) {
      const size = right - left + 1;
      const offset = k - left + 1;
      const z = Math.log(size);
      const s = 0.5 * Math.exp((2 * z) / 3);
      const sd = 0.5 * Math.sqrt((z * s * (size - s)) / size) * Math.sign(offset - size / 2);
      select(
        a,
        k,
        Math.max(left, Math.floor(k - (offset * s) / size + sd)),
        Math.min(right, Math.floor(k + ((size - offset) * s) / size + sd)),
      );
    }
    const pivot = a[k];
    let i = left;
    let j = right;
    swap(a, left, k);
    if (a[right] > pivot) swap(a, left, right);
    while (i < j) {
      swap(a, i, j);
      i++;
      j--;
      while (a[i] < pivot) i++;
      while (a[j] > pivot) j--;
    }
    if (a[left] === pivot) swap(a, left, j);
    else swap(a, ++j, right);
    if (j <= k) left = j + 1;
    if (k <= j) right = j - 1;
  }
}

function swap(a: Float64Array | Float32Array, i: number, j: number): void {
  const t = a[i];
  a[i] = a[j];
  a[j] = t;
}

/** Copies what is not NaN to the front of `a` and returns how many there are; the order is kept. */
export function dropNaNInPlace(a: Float64Array | Float32Array, n = a.length): number {
  let kept = 0;
  for (let i = 0; i < n; i++) if (!Number.isNaN(a[i])) a[kept++] = a[i];
  return kept;
}

/** Quantile of the first `n` values of `a`, which is reordered; linear between order statistics (type 7 of Hyndman & Fan 1996,
 *  Am. Stat. 50, 361). NaN of nothing. No NaN allowed inside. */
export function quantileInPlace(a: Float64Array | Float32Array, p: number, n = a.length): number {
  if (n === 0) return Number.NaN;
  const position = Math.min(1, Math.max(0, p)) * (n - 1);
  const k = Math.floor(position);
  const low = selectInPlace(a, k, n);
  const part = position - k;
  if (part === 0) return low;
  let next = Infinity;
  for (let i = k + 1; i < n; i++) if (a[i] < next) next = a[i];
  return low + part * (next - low);
}

/** Median of the first `n` values of `a`, which is reordered. NaN of nothing. No NaN allowed inside. */
export const medianInPlace = (a: Float64Array | Float32Array, n = a.length): number => quantileInPlace(a, 0.5, n);

/** Median absolute deviation from `centre` (the median where not given) of the first `n` values of `a`, which is overwritten.
 *  Times SD_PER_MAD: a robust standard deviation. */
export function madInPlace(a: Float64Array | Float32Array, n = a.length, centre = medianInPlace(a, n)): number {
  for (let i = 0; i < n; i++) a[i] = Math.abs(a[i] - centre);
  return medianInPlace(a, n);
}

/** Quantile of those values that are not NaN; the input is left alone. NaN where none is left. */
export function quantile(values: ArrayLike<number>, p: number): number {
  const a = Float64Array.from(values);
  return quantileInPlace(a, p, dropNaNInPlace(a));
}

/** Median of those values that are not NaN; the input is left alone. NaN where none is left. */
export const median = (values: ArrayLike<number>): number => quantile(values, 0.5);

/** Median absolute deviation of those values that are not NaN, from `centre` or their median; the input is left alone. */
export function mad(values: ArrayLike<number>, centre?: number): number {
  const a = Float64Array.from(values);
  const n = dropNaNInPlace(a);
  return centre === undefined ? madInPlace(a, n) : madInPlace(a, n, centre);
}

/** Mean direction of angles and the mean resultant length (1 = all alike, 0 = no direction); NaN angles and weights of 0 do not
 *  count. K. V. Mardia & P. E. Jupp, Directional Statistics (2000), ch. 2. Both NaN where nothing counts. */
export function circularMean(
  anglesRad: ArrayLike<number>,
  weights?: ArrayLike<number>,
): { readonly meanRad: number; readonly resultant: number } {
  let c = 0;
  let s = 0;
  let total = 0;
  for (let i = 0; i < anglesRad.length; i++) {
    const a = anglesRad[i];
    const w = weights ? weights[i] : 1;
    if (Number.isNaN(a) || !(w > 0)) continue;
    c += w * Math.cos(a);
    s += w * Math.sin(a);
    total += w;
  }
  if (total === 0) return { meanRad: Number.NaN, resultant: Number.NaN };
  return { meanRad: Math.atan2(s, c), resultant: Math.hypot(c, s) / total };
}

/** The same angle in (−π, π]. */
export function wrapAngle(rad: number): number {
  const turned = rad - 2 * Math.PI * Math.round(rad / (2 * Math.PI));
  return turned <= -Math.PI ? turned + 2 * Math.PI : turned;
}
