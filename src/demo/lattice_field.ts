/** A real function of the plane that can be evaluated anywhere. */
export interface Field {
  /** Prepares rows of `n` points x0, x0 + dx, …; the function returned fills `out` with the values at height y. */
  sampler(x0: number, dx: number, n: number): (y: number, out: Float64Array) => void;
}

/** One independent share of a random field. */
export interface FieldShare {
  readonly seed: number;
  readonly weight: number;
}

/** Kernel's reach in units of its scale; e^{−18} = 1.5e-8 is left out. */
const REACH = 6;

/** Turns a whole number into a hashed one: multiply and fold, two rounds (Wellons' lowbias32, public domain). */
function mix(h: number): number {
  h = Math.imul(h ^ (h >>> 16), 0x7feb352d);
  h = Math.imul(h ^ (h >>> 15), 0x846ca68b);
  return h ^ (h >>> 16);
}

/** A standard normal number that belongs to lattice site (i, j); Box & Muller (1958) on two hashed uniforms. */
function siteNormal(seed: number, i: number, j: number): number {
  const h = mix(mix(mix(seed + 0x3c6ef372) + i) + j);
  const a = ((mix(h ^ 0x5bd1e995) >>> 0) + 0.5) / 4294967296;
  const b = ((mix(h ^ 0x1b873593) >>> 0) + 0.5) / 4294967296;
  return Math.sqrt(-2 * Math.log(a)) * Math.cos(2 * Math.PI * b);
}

/** A stationary Gaussian random field in closed form: independent normal numbers on a square lattice of pitch `scaleNm`, each spread
 *  by the Gaussian exp(−r²/(2·scaleNm²)). Smooth (analytic up to the cut at 6 scales), never periodic, defined at every point of the
 *  plane, and fast on grids because the kernel separates. Correlation exp(−r²/(4·scaleNm²)); mean 0 and, where the squared weights
 *  add to 1, variance 1 to 2e-4 (the lattice is finer than its kernel). */
export function latticeField(shares: readonly FieldShare[], scaleNm: number): Field {
  const c = scaleNm;
  const reach = REACH;
  const taps = 2 * reach + 1;
  const norm = 1 / Math.sqrt(Math.sqrt(Math.PI));
  const weightsAt = (position: number, out: Float64Array, offset: number): number => {
    const first = Math.round(position / c) - reach;
    for (let t = 0; t < taps; t++) {
      const u = position / c - (first + t);
      out[offset + t] = norm * Math.exp(-0.5 * u * u);
    }
    return first;
  };
  return {
    sampler(x0, dx, n) {
      const xWeights = new Float64Array(n * taps);
      const xFirst = new Int32Array(n);
      let low = Number.POSITIVE_INFINITY;
      let high = Number.NEGATIVE_INFINITY;
      for (let k = 0; k < n; k++) {
        const first = weightsAt(x0 + k * dx, xWeights, k * taps);
        xFirst[k] = first;
        low = Math.min(low, first);
        high = Math.max(high, first + taps - 1);
      }
      const width = high - low + 1;
      for (let k = 0; k < n; k++) xFirst[k] -= low;
      const siteRows = new Map<number, Float64Array>();
      const siteRow = (i: number): Float64Array => {
        let row = siteRows.get(i);
        if (row === undefined) {
          row = new Float64Array(width);
          for (const { seed, weight } of shares) {
            if (weight === 0) continue;
            for (let j = 0; j < width; j++) row[j] += weight * siteNormal(seed, i, low + j);
          }
          siteRows.set(i, row);
        }
        return row;
      };
      const yWeights = new Float64Array(taps);
      const line = new Float64Array(width);
      return (y, out) => {
        const first = weightsAt(y, yWeights, 0);
        line.fill(0);
        for (let t = 0; t < taps; t++) {
          const row = siteRow(first + t);
          const w = yWeights[t];
          for (let j = 0; j < width; j++) line[j] += w * row[j];
        }
        for (let k = 0; k < n; k++) {
          const at = xFirst[k];
          const base = k * taps;
          let sum = 0;
          for (let t = 0; t < taps; t++) sum += xWeights[base + t] * line[at + t];
          out[k] = sum;
        }
      };
    },
  };
}
