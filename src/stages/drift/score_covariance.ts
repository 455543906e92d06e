/** A symmetric 2 × 2 matrix. */
export interface Sym2 {
  readonly xx: number;
  readonly xy: number;
  readonly yy: number;
}

/** Covariance of the sum of block sums (x, y) on a grid of rows × cols blocks, from how they scatter: Σ_b Σ_b' s_b s_b'ᵀ over blocks
 *  that touch. Noise correlated over less than a block's side is then counted whole, whatever its form. Where the touching
 *  blocks bring the sum below half of the blocks' own (few blocks, chance), the blocks' own are taken.
 *  @param weights factor for each row of blocks, or null
 *  Source: heteroscedasticity and autocorrelation consistent covariance, Conley 1999, J. Econometrics 92, 1. */
export function scoreCovariance(
  x: Float64Array,
  y: Float64Array,
  rows: number,
  cols: number,
  weights: Float64Array | null,
): Sym2 {
  let xx = 0;
  let xy = 0;
  let yy = 0;
  let ownX = 0;
  let ownY = 0;
  let ownXY = 0;
  for (let i = 0; i < rows; i++) {
    const w = weights === null ? 1 : weights[i];
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      const u = w * x[p];
      const v = w * y[p];
      if (u === 0 && v === 0) continue;
      ownX += u * u;
      ownXY += u * v;
      ownY += v * v;
      for (let a = Math.max(0, i - 1); a <= Math.min(rows - 1, i + 1); a++) {
        const wa = weights === null ? 1 : weights[a];
        for (let b = Math.max(0, j - 1); b <= Math.min(cols - 1, j + 1); b++) {
          const q = a * cols + b;
          xx += u * wa * x[q];
          xy += u * wa * y[q];
          yy += v * wa * y[q];
        }
      }
    }
  }
  if (xx < 0.5 * ownX || yy < 0.5 * ownY || xx * yy <= xy * xy) return { xx: ownX, xy: ownXY, yy: ownY };
  return { xx, xy, yy };
}

/** The first, scaled up to the second where that is larger over both axes by more than its own chance (`blocks` sums, nine products of each). */
export function larger(a: Sym2, b: Sym2, blocks: number): Sym2 {
  const chance = 1 + (2 * 3) / Math.sqrt(Math.max(1, blocks));
  const factor = Math.max(1, (0.5 * (b.xx / a.xx + b.yy / a.yy)) / chance);
  return { xx: factor * a.xx, xy: factor * a.xy, yy: factor * a.yy };
}
