/** Weighted least-squares fit that never falls (or never rises): pool adjacent violators (Barlow, Bartholomew, Bremner & Brunk 1972,
 *  Statistical Inference under Order Restrictions; Best & Chakravarti 1990, Math. Program. 47, 425). `y` in the order of the
 *  abscissa, `weights` ∝ 1/variance, all > 0 and finite (RangeError otherwise). */
export function isotonicRegression(
  y: ArrayLike<number>,
  weights?: ArrayLike<number> | null,
  increasing = true,
): Float64Array {
  const n = y.length;
  if (weights && weights.length !== n) throw new RangeError(`${weights.length} weights for ${n} values`);
  const sign = increasing ? 1 : -1;
  // A stack of blocks: mean, weight, and the index after the last member.
  const mean = new Float64Array(n);
  const weight = new Float64Array(n);
  const end = new Int32Array(n);
  let blocks = 0;
  for (let i = 0; i < n; i++) {
    const w = weights ? weights[i] : 1;
    if (!(w > 0 && w < Infinity) || !Number.isFinite(y[i])) {
      throw new RangeError(`value ${y[i]} with weight ${w} at index ${i} cannot be fitted`);
    }
    mean[blocks] = sign * y[i];
    weight[blocks] = w;
    end[blocks] = i + 1;
    while (blocks > 0 && mean[blocks - 1] >= mean[blocks]) {
      const a = blocks - 1;
      const sum = weight[a] + weight[blocks];
      mean[a] = (mean[a] * weight[a] + mean[blocks] * weight[blocks]) / sum;
      weight[a] = sum;
      end[a] = end[blocks];
      blocks = a;
    }
    blocks++;
  }
  const fit = new Float64Array(n);
  for (let b = 0, i = 0; b < blocks; b++) for (; i < end[b]; i++) fit[i] = sign * mean[b];
  return fit;
}

/** Where a rising piecewise linear curve through (x, fit) passes `level`: the middle of the flat where it stays on the level, NaN
 *  where it does not reach it. x rising. */
export function crossing(x: ArrayLike<number>, fit: ArrayLike<number>, level: number): number {
  const n = x.length;
  let first = 0;
  while (first < n && fit[first] < level) first++;
  if (first === n || (first === 0 && fit[0] > level)) return Number.NaN;
  if (fit[first] > level) {
    const rise = fit[first] - fit[first - 1];
    return x[first - 1] + ((level - fit[first - 1]) / rise) * (x[first] - x[first - 1]);
  }
  let last = first;
  while (last + 1 < n && fit[last + 1] === level) last++;
  return 0.5 * (x[first] + x[last]);
}
