/** An extreme value, how many numbers have it, and how many the next value inwards. */
export interface End {
  readonly value: number;
  readonly count: number;
  readonly nextCount: number;
}

export interface Ends {
  /** Numbers that are not NaN, and those of them that are infinite. */
  readonly measured: number;
  readonly infinite: number;
  /** Of the finite ones; ±Infinity with a count of 0 where there are none. */
  readonly low: End;
  readonly high: End;
}

/** Both ends of many numbers, in one pass. NaN and infinities are left out. */
export function endsOf(values: ArrayLike<number>): Ends {
  let measured = 0;
  let infinite = 0;
  let high = -Infinity;
  let nextHigh = -Infinity;
  let highs = 0;
  let nextHighs = 0;
  let low = Infinity;
  let nextLow = Infinity;
  let lows = 0;
  let nextLows = 0;
  for (let p = 0; p < values.length; p++) {
    const v = values[p];
    if (Number.isNaN(v)) continue;
    measured++;
    if (v > nextLow && v < nextHigh) continue;
    if (v === Infinity || v === -Infinity) {
      infinite++;
      continue;
    }
    if (v > high) {
      [nextHigh, nextHighs, high, highs] = [high, highs, v, 1];
    } else if (v === high) highs++;
    else if (v > nextHigh) [nextHigh, nextHighs] = [v, 1];
    else if (v === nextHigh) nextHighs++;
    if (v < low) {
      [nextLow, nextLows, low, lows] = [low, lows, v, 1];
    } else if (v === low) lows++;
    else if (v < nextLow) [nextLow, nextLows] = [v, 1];
    else if (v === nextLow) nextLows++;
  }
  return {
    measured,
    infinite,
    low: { value: low, count: lows, nextCount: nextLows },
    high: { value: high, count: highs, nextCount: nextHighs },
  };
}
