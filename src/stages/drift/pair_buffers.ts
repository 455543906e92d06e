/** Pixel buffers of a pair, on the reference's pixels; outside the overlap of the pair at hand they hold what an earlier one left there. */
export interface PairBuffers {
  /** 1 = takes part. */
  readonly mask: Uint8Array;
  /** The reference less its nuisance; the moving image sampled at the shift; their difference. */
  readonly level: Float32Array;
  readonly moved: Float32Array;
  readonly residual: Float32Array;
  /** 1 − u², u the residual over Tukey's limit; 0 beyond it and where a pixel takes no part. The weight is its square. */
  readonly closeness: Float32Array;
  readonly sample: Float64Array;
}

/** Pairs come one after the other, on three or four sizes of a pyramid. */
const KEPT = 6;
const kept: { readonly rows: number; readonly cols: number; readonly buffers: PairBuffers }[] = [];

/** The buffers for a size, which every pair of that size shares: a pair must be done with before the next begins. */
export function buffersFor(rows: number, cols: number): PairBuffers {
  const found = kept.find((k) => k.rows === rows && k.cols === cols);
  if (found !== undefined) return found.buffers;
  const n = rows * cols;
  const buffers = {
    mask: new Uint8Array(n),
    level: new Float32Array(n),
    moved: new Float32Array(n),
    residual: new Float32Array(n),
    closeness: new Float32Array(n),
    sample: new Float64Array(8192),
  };
  if (kept.length >= KEPT) kept.shift();
  kept.push({ rows, cols, buffers });
  return buffers;
}
