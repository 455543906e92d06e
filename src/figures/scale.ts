/** From values to points of the drawing. */
export interface Scale {
  (v: number): number;
  readonly low: number;
  readonly high: number;
}

export function linear(low: number, high: number, from: number, to: number): Scale {
  const slope = (to - from) / (high - low);
  return Object.assign((v: number) => from + (v - low) * slope, { low, high });
}

export function logarithmic(low: number, high: number, from: number, to: number): Scale {
  const slope = (to - from) / Math.log(high / low);
  return Object.assign((v: number) => from + Math.log(v / low) * slope, { low, high });
}

/** Round steps of 1, 2 or 5 times a power of ten within [low, high]: as near to `wanted` of them as can be, at least two. */
export function niceTicks(low: number, high: number, wanted: number): number[] {
  if (!(high > low)) return [low];
  const power = Math.floor(Math.log10((high - low) / Math.max(1, wanted)));
  let best: number[] = [];
  for (let e = power - 1; e <= power + 1; e++) {
    for (const factor of [5, 2, 1]) {
      const ticks = multiples(factor, e, low, high);
      if (ticks.length < 2 || ticks.length > 4 * wanted + 4) continue;
      if (best.length === 0 || Math.abs(ticks.length - wanted) < Math.abs(best.length - wanted)) best = ticks;
    }
  }
  return best;
}

/** The multiples of factor · 10^e within [low, high]. */
function multiples(factor: number, e: number, low: number, high: number): number[] {
  const step = factor * 10 ** e;
  const out: number[] = [];
  for (let k = Math.ceil(low / step - 1e-9); k * step <= high + 1e-9 * step; k++)
    out.push(k === 0 ? 0 : e < 0 ? (k * factor) / 10 ** -e : k * step);
  return out;
}

/** The largest 1, 2 or 5 times a power of ten that is at most `most`. */
export function roundBelow(most: number): number {
  const power = 10 ** Math.floor(Math.log10(most));
  return power * ([5, 2, 1].find((m) => m * power <= most * (1 + 1e-9)) ?? 1);
}

/** Powers of ten within [low, high], with 2 and 5 between them where there are fewer than three. */
export function logTicks(low: number, high: number): number[] {
  const out = (factors: readonly number[]): number[] => {
    const ticks: number[] = [];
    for (let e = Math.floor(Math.log10(low)); e <= Math.ceil(Math.log10(high)); e++)
      for (const f of factors) {
        const v = f * 10 ** e;
        if (v >= low * 0.9999 && v <= high * 1.0001) ticks.push(v);
      }
    return ticks;
  };
  const decades = out([1]);
  return decades.length >= 3 ? decades : out([1, 2, 5]);
}

/** What lies between powers of ten: 2 to 9 times each. */
export function minorLogTicks(low: number, high: number): number[] {
  const out: number[] = [];
  for (let e = Math.floor(Math.log10(low)); e <= Math.ceil(Math.log10(high)); e++)
    for (let f = 2; f <= 9; f++) if (f * 10 ** e >= low && f * 10 ** e <= high) out.push(f * 10 ** e);
  return out;
}

/** Labels of ticks, all with the digits that the finest step between them needs, a true minus sign. */
export function tickLabels(ticks: readonly number[]): string[] {
  let gap = Infinity;
  for (let k = 1; k < ticks.length; k++) gap = Math.min(gap, Math.abs(ticks[k] - ticks[k - 1]) || gap);
  if (!Number.isFinite(gap)) gap = Math.abs(ticks[0] ?? 1) || 1;
  let digits = 0;
  while (digits < 12 && ticks.some((t) => Math.abs(t - Number(t.toFixed(digits))) > 1e-3 * gap)) digits++;
  return ticks.map((t) => numberText(t, digits));
}

export function numberText(v: number, digits: number): string {
  return v
    .toFixed(digits)
    .replace(/^-(?=0(\.0*)?$)/, "")
    .replace("-", "\u2212");
}

/** The smallest and largest finite value, widened by a share of their distance. */
export function extent(values: Iterable<number | null>, margin = 0): [number, number] {
  let low = Infinity;
  let high = -Infinity;
  for (const v of values) {
    if (v === null || !Number.isFinite(v)) continue;
    low = Math.min(low, v);
    high = Math.max(high, v);
  }
  if (low > high) return [0, 1];
  const room = (high - low) * margin || (margin > 0 ? Math.abs(low) * margin || 1 : 0);
  return [low - room, high + room];
}
