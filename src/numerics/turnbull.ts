/** A piece of the distribution: `mass` lies somewhere in [low, high]. */
export interface TurnbullCell {
  readonly low: number;
  readonly high: number;
  readonly mass: number;
}

export interface TurnbullFit {
  readonly cells: readonly TurnbullCell[];
  readonly logLikelihood: number;
  /** False where the iteration ended before the optimality conditions held. */
  readonly converged: boolean;
}

/** Nonparametric maximum-likelihood distribution of values known only to lie in closed intervals [low, high] (±Infinity allowed, equal
 *  ends = exact). Cells after Turnbull 1976, J. R. Stat. Soc. B 38, 290; masses by his self-consistency iteration until no cell's
 *  likelihood gradient exceeds the number of values by more than `tolerance` of it. Cells of no mass are kept, with mass near 0. */
export function turnbull(
  low: ArrayLike<number>,
  high: ArrayLike<number>,
  tolerance = 1e-7,
  maxIterations = 200_000,
): TurnbullFit {
  const n = low.length;
  for (let i = 0; i < n; i++) if (!(low[i] <= high[i])) throw new RangeError(`interval ${low[i]} … ${high[i]}`);
  const cells = innermost(low, high);
  const m = cells.length;
  // Cells within one interval are neighbours: first and last suffice.
  const first = new Int32Array(n);
  const last = new Int32Array(n);
  for (let i = 0; i < n; i++) {
    first[i] = cells.findIndex((c) => c[0] >= low[i]);
    last[i] = cells.findLastIndex((c) => c[1] <= high[i]);
  }
  const mass = new Float64Array(m).fill(1 / m);
  const gradient = new Float64Array(m);
  let logLikelihood = 0;
  let converged = n === 0;
  for (let iteration = 0; iteration < maxIterations && !converged; iteration++) {
    gradient.fill(0);
    logLikelihood = 0;
    for (let i = 0; i < n; i++) {
      let held = 0;
      for (let c = first[i]; c <= last[i]; c++) held += mass[c];
      logLikelihood += Math.log(held);
      for (let c = first[i]; c <= last[i]; c++) gradient[c] += 1 / held;
    }
    // Optimal: the gradient is n on the support and nowhere more (the masses themselves then follow from it).
    converged = true;
    for (let c = 0; c < m; c++) {
      if (gradient[c] > n * (1 + tolerance)) converged = false;
      if (mass[c] > tolerance && gradient[c] < n * (1 - tolerance)) converged = false;
      mass[c] *= gradient[c] / n;
    }
  }
  return { cells: cells.map(([l, h], c) => ({ low: l, high: h, mass: mass[c] })), logLikelihood, converged };
}

/** The intervals that begin with some left end and close with the next right end: only they can carry mass. */
function innermost(low: ArrayLike<number>, high: ArrayLike<number>): (readonly [number, number])[] {
  const ends: { at: number; right: boolean }[] = [];
  for (let i = 0; i < low.length; i++) ends.push({ at: low[i], right: false }, { at: high[i], right: true });
  // Closed intervals: at one point left ends come first.
  ends.sort((a, b) => (a.at === b.at ? Number(a.right) - Number(b.right) : a.at < b.at ? -1 : 1));
  const cells: (readonly [number, number])[] = [];
  for (let k = 1; k < ends.length; k++) {
    if (ends[k].right && !ends[k - 1].right) cells.push([ends[k - 1].at, ends[k].at]);
  }
  return cells;
}
