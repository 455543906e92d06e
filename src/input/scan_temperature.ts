/** A log of the thermometer: times in s, strictly growing, and the sensor's temperatures in K; straight lines in between. */
export interface TemperatureLog {
  readonly timesS: Float64Array;
  readonly kelvin: Float64Array;
}

export interface ScanTemperature {
  /** Of the sample: time-weighted mean over the scan, behind the sensor by the lag. */
  readonly meanK: number;
  /** Time-weighted standard deviation over the scan, the ramp included. */
  readonly sdK: number;
  /** Slope of the straight line that fits the scan best. */
  readonly rampKPerS: number;
  /** What the lag made of the sensor's mean: `meanK` less that. */
  readonly lagShiftK: number;
  /** The longest time without an entry that the scan lies in. */
  readonly longestGapS: number;
}

/**
 * Temperature of the sample during one scan. The mean is over time, by the trapezoid rule on the log with its ends interpolated, not
 * over the log's entries, which may lie unevenly. The sample follows the sensor with the time constant τ, τ dT/dt = T_sensor − T,
 * solved exactly for a sensor that runs straight between two entries; at the log's first entry it is taken to be as warm as the sensor.
 * On a ramp r it stays behind by r τ, to opposite sides on the two branches: without the correction a loop would seem wider by 2 |r| τ.
 * @returns null where the scan does not lie inside the log
 */
export function scanTemperature(
  log: TemperatureLog,
  startS: number,
  endS: number,
  lagS: number,
): ScanTemperature | null {
  const { timesS: t, kelvin } = log;
  const n = t.length;
  if (n === 0 || startS < t[0] || endS > t[n - 1] || !(endS >= startS)) return null;
  const sums = new ScanSums(startS, endS, kelvin[0]);
  // The sample, carried along from the log's beginning; what is some fifty time constants back is forgotten.
  let sample = kelvin[0];
  let lagIntegral = 0;
  let gap = 0;
  const first = lagS > 0 ? Math.max(0, lastAtOrBefore(t, startS - 50 * lagS)) : lastAtOrBefore(t, startS);
  if (first > 0) sample = kelvin[first];
  for (let k = first; k + 1 < n && t[k] <= endS; k++) {
    const slope = (kelvin[k + 1] - kelvin[k]) / (t[k + 1] - t[k]);
    const at = (time: number): number => kelvin[k] + slope * (time - t[k]);
    const [a, b] = [Math.max(startS, t[k]), Math.min(endS, t[k + 1])];
    if (a < b || (a === b && startS === endS)) {
      sums.add(a, at(a), b, at(b));
      gap = Math.max(gap, t[k + 1] - t[k]);
    }
    if (lagS > 0) {
      // T(t) = sensor(t) − r τ + c e^(−(t − t_k)/τ), with c from where the sample stands.
      const c = sample - kelvin[k] + slope * lagS;
      if (a < b) {
        const decay = (time: number): number => Math.exp(-(time - t[k]) / lagS);
        lagIntegral += -slope * lagS * (b - a) + c * lagS * (decay(a) - decay(b));
      } else if (a === b && startS === endS) lagIntegral = -slope * lagS + c * Math.exp(-(a - t[k]) / lagS);
      sample = kelvin[k + 1] - slope * lagS + c * Math.exp(-(t[k + 1] - t[k]) / lagS);
    }
  }
  const lagShiftK = lagS > 0 ? (endS > startS ? lagIntegral / (endS - startS) : lagIntegral) : 0;
  return { ...sums.result(lagShiftK), longestGapS: gap };
}

/** Sums over straight pieces, about the middle of the scan and a temperature near by, so that no digits are lost. */
class ScanSums {
  readonly #middleS: number;
  readonly #durationS: number;
  readonly #aboutK: number;
  #value: number | null = null;
  #first = 0;
  #second = 0;
  #moment = 0;

  constructor(startS: number, endS: number, aboutK: number) {
    this.#middleS = (startS + endS) / 2;
    this.#durationS = endS - startS;
    this.#aboutK = aboutK;
  }

  /** A piece from (a, ya) to (b, yb). */
  add(a: number, ya: number, b: number, yb: number): void {
    this.#value ??= ya;
    const h = b - a;
    const [u, v] = [ya - this.#aboutK, yb - this.#aboutK];
    const [p, q] = [a - this.#middleS, b - this.#middleS];
    this.#first += (h * (u + v)) / 2;
    this.#second += (h * (u * u + u * v + v * v)) / 3;
    this.#moment += (h * (2 * p * u + p * v + q * u + 2 * q * v)) / 6;
  }

  result(lagShiftK: number): Omit<ScanTemperature, "longestGapS"> {
    const d = this.#durationS;
    if (d === 0) return { meanK: (this.#value ?? this.#aboutK) + lagShiftK, sdK: 0, rampKPerS: 0, lagShiftK };
    const mean = this.#first / d;
    return {
      meanK: this.#aboutK + mean + lagShiftK,
      sdK: Math.sqrt(Math.max(0, this.#second / d - mean * mean)),
      rampKPerS: (12 * this.#moment) / d ** 3,
      lagShiftK,
    };
  }
}

/** Index of the last time at or before `s`; −1 where there is none. */
function lastAtOrBefore(t: Float64Array, s: number): number {
  let [low, high] = [-1, t.length];
  while (high - low > 1) {
    const middle = (low + high) >> 1;
    if (t[middle] <= s) low = middle;
    else high = middle;
  }
  return low;
}
