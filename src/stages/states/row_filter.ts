/** Kalman filter over the measured rows, for −2 log L as a parabola in the contrast δ: value − fall·δ + bend·δ². Both the measurements
 *  and what a contrast adds to them pass the same filter, as it is linear. */
export class RowFilter {
  value = 0;
  fall = 0;
  bend = 0;
  private readonly y: Float64Array;
  private readonly slope: Float64Array;
  /** Variance of each measurement, and the rows since the one before. */
  private readonly variance: Float64Array;
  private readonly steps: Float64Array;

  /** @param unit all variances are in units of its square, so that products of a few stay far from overflow */
  constructor(y: Float64Array, slope: Float64Array, sd: Float64Array, unit: number) {
    const rows = [...sd.keys()].filter((i) => Number.isFinite(sd[i]));
    this.y = Float64Array.from(rows, (i) => y[i] / unit);
    this.slope = Float64Array.from(rows, (i) => slope[i] / unit);
    this.variance = Float64Array.from(rows, (i) => (sd[i] / unit) ** 2);
    this.steps = Float64Array.from(rows, (i, k) => (k === 0 ? 0 : i - rows[k - 1]));
  }

  /** @param walk2, white2 variances of one step of the walk and of the independent part */
  run(walk2: number, white2: number): void {
    const { y, slope, variance, steps } = this;
    // the first measurement says all that is known of the walk
    let ay = y[0];
    let as = slope[0];
    let p = white2 + variance[0];
    let [logs, product, yy, ys, ss] = [0, 1, 0, 0, 0];
    for (let k = 1; k < y.length; k++) {
      p += walk2 * steps[k];
      const r = white2 + variance[k];
      const f = 1 / (p + r);
      const dy = y[k] - ay;
      const ds = slope[k] - as;
      yy += dy * dy * f;
      ys += dy * ds * f;
      ss += ds * ds * f;
      // one logarithm for some rows together
      product *= f;
      if ((k & 7) === 0) {
        logs -= Math.log(product);
        product = 1;
      }
      const gain = p * f;
      ay += gain * dy;
      as += gain * ds;
      p *= r * f;
    }
    this.value = yy + logs - Math.log(product);
    this.fall = 2 * ys;
    this.bend = ss;
  }
}
