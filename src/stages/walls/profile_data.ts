/** The pixels of one profile, in arrays that are used again for the next one: no allocation inside the loop over profiles. */
export class ProfileData {
  count = 0;
  /** Signed distance from the traced wall, nm. */
  distance = new Float64Array(0);
  /** Arc position along the wall from the middle of the stretch, nm. */
  arc = new Float64Array(0);
  /** Signal along the chosen direction, and what the two states contribute to it: y = I·alpha·(1−u) + M·beta·u. */
  value = new Float64Array(0);
  alpha = new Float64Array(0);
  beta = new Float64Array(0);
  /** 1/sd of the pixel's noise along that direction. */
  weight = new Float64Array(0);
  /** Row-major pixel index in the frame. */
  pixel = new Int32Array(0);

  reserve(n: number): void {
    if (this.distance.length >= n) return;
    const size = Math.max(256, 2 * n);
    this.distance = new Float64Array(size);
    this.arc = new Float64Array(size);
    this.value = new Float64Array(size);
    this.alpha = new Float64Array(size);
    this.beta = new Float64Array(size);
    this.weight = new Float64Array(size);
    this.pixel = new Int32Array(size);
  }

  /** Keeps only pixels k with keep[k] ≠ 0. */
  compact(keep: Uint8Array): void {
    let m = 0;
    for (let k = 0; k < this.count; k++) {
      if (keep[k] === 0) continue;
      this.distance[m] = this.distance[k];
      this.arc[m] = this.arc[k];
      this.value[m] = this.value[k];
      this.alpha[m] = this.alpha[k];
      this.beta[m] = this.beta[k];
      this.weight[m] = this.weight[k];
      this.pixel[m] = this.pixel[k];
      m++;
    }
    this.count = m;
  }
}
