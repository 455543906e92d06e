/** A number with its 95 % interval; all null where it cannot be had. */
export interface Interval {
  readonly value: number | null;
  readonly low: number | null;
  readonly high: number | null;
}

/** One cycle's hysteresis; see the `loops` table of the exported data. */
export interface Loop {
  readonly cycle: number;
  readonly coolingHalfK: Interval;
  readonly warmingHalfK: Interval;
  readonly widthK: Interval;
  readonly areaK: number | null;
  readonly lowestFraction: number | null;
  readonly highestFraction: number | null;
  readonly complete: boolean;
}
