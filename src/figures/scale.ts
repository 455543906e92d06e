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

/** Round steps of 1, 2, 2.5 or 5 times a power of ten within [low, high], about `wanted` of them. */
export function niceTicks(low: number, high: number, wanted: number): number[] {
  if (!(high > low)) return [low];
  const rough = (high - low) / Math.max(1, wanted);
  const power = 10 ** Math.floor(Math.log10(rough));
  const step = power * ([1, 2, 2.5, 5, 10].find((m) => m * power >= rough * 0.999) ?? 10);
  const out: number[] = [];
  for (let k = Math.ceil(low / step - 1e-9); k * step <= high + 1e-9 * step; k++) out.push(k * step);
  return out;
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

/** Labels of ticks, all with the digits that the finest step between them needs, a true minus sign. */
export function tickLabels(ticks: readonly number[]): string[] {
  let digits = 0;
  while (digits < 6 && ticks.some((t) => Math.abs(t - Number(t.toFixed(digits))) > 1e-9 * Math.max(1, Math.abs(t)))) digits++;
  return ticks.map((t) => numberText(t, digits));
}

export function numberText(v: number, digits: number): string {
  return v.toFixed(digits).replace(/^-(?=0(\.0*)?$)/, "").replace("-", "\u2212");
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
