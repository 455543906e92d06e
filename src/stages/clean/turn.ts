import { wrapAngle } from "../../numerics/quantile.js";

/** Arcs that the circle is cut into: cosine and sine are taken once an arc. */
const ARCS = 1024;

/** Brings angles into (−π, π], in place. */
export function wrapAll(angles: Float32Array): Float32Array {
  for (let p = 0; p < angles.length; p++) {
    const a = angles[p];
    if (a > Math.PI || a <= -Math.PI) angles[p] = wrapAngle(a);
  }
  return angles;
}

/** Turns an image of angles so that its circular mean is 0, in (−π, π]. NaN = not measured.
 *
 *  Within an arc of width h cosine and sine go straight from its middle; what is left out, (offset)²/2 of each, is nearly the same for all arcs, so
 *  that the mean direction is right to 1e-6 rad. */
export function turnToMean(phase: Float32Array): void {
  wrapAll(phase);
  const counts = new Int32Array(ARCS);
  const sums = new Float64Array(ARCS);
  const perRad = ARCS / (2 * Math.PI);
  for (let p = 0; p < phase.length; p++) {
    const a = phase[p];
    if (Number.isNaN(a)) continue;
    const k = ((a + Math.PI) * perRad) & (ARCS - 1);
    counts[k]++;
    sums[k] += a;
  }
  let c = 0;
  let s = 0;
  for (let k = 0; k < ARCS; k++) {
    const middle = (k + 0.5) / perRad - Math.PI;
    const offsets = sums[k] - counts[k] * middle;
    c += counts[k] * Math.cos(middle) - offsets * Math.sin(middle);
    s += counts[k] * Math.sin(middle) + offsets * Math.cos(middle);
  }
  const mean = Math.atan2(s, c);
  for (let p = 0; p < phase.length; p++) {
    let a = phase[p] - mean;
    if (a > Math.PI) a -= 2 * Math.PI;
    else if (a <= -Math.PI) a += 2 * Math.PI;
    // π in single precision is a little more than π: it must not come out
    phase[p] = a > LARGEST ? LARGEST : a < -LARGEST ? -LARGEST : a;
  }
}

/** The largest angle in single precision that is not above π. */
const LARGEST = 3.1415925;
