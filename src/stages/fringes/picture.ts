import type { FrameLevels, NoiseCovariance, Signal } from "../../model/signal.js";
import { FRINGE_COLUMNS, type FringeBins } from "../../model/pictures.js";
import { shareAt, type Blur } from "./basis.js";
import type { Chord } from "./chord.js";
import type { FittedCurve } from "./estimate.js";
import type { Profile } from "./profile.js";
import type { Stretch } from "./stretches.js";

/** With more bins than this, those far from the wall are drawn three together: so many on each side stay single. */
const MOST_BINS = 60;
const NEAR_BINS = 24;
const TOGETHER = 3;

/** The signal beside one stretch in the bins of its profile, with the null and the fit, for drawing. The phase's sd is that of the bin
 *  across the chord, carried over to the direction in which the phase turns by the pixel noise of the two. */
export function drawnFringe(
  signal: Signal,
  levels: FrameLevels,
  stretch: Stretch,
  distanceNm: Float32Array,
  binNm: number,
  profile: Profile,
  chord: Chord,
  blur: Blur,
  fitted: FittedCurve,
): FringeBins {
  const groups = groupsOf(profile, binNm);
  const count = groups.length - 1;
  const means = meanSignal(signal, stretch, distanceNm, binNm, profile);
  const { insulating } = levels;
  const size2 = insulating.re ** 2 + insulating.im ** 2;
  const bins = new Float32Array(count * FRINGE_COLUMNS);
  const scratch = new Float64Array(4);
  /** Adds (re, im)/z_I with its weight. */
  const add = (at: number, re: number, im: number, weight: number): void => {
    bins[at] += (weight * (re * insulating.re + im * insulating.im)) / size2;
    bins[at + 1] += (weight * (im * insulating.re - re * insulating.im)) / size2;
  };
  for (let b = 0; b < count; b++) {
    const from = groups[b];
    const to = groups[b + 1];
    const at = b * FRINGE_COLUMNS;
    const weight = 1 / (to - from);
    let variance = 0;
    for (let k = from; k < to; k++) {
      const u = shareAt(profile.distanceNm[k], blur, scratch);
      const re = chord.insulating.re + u * chord.length * chord.ex;
      const im = chord.insulating.im + u * chord.length * chord.ey;
      const off = fitted.offset[k];
      const across = fitted.across[k] + off;
      const along = fitted.along[k];
      bins[at] += weight * profile.distanceNm[k];
      add(at + 1, means.re[k], means.im[k], weight);
      add(at + 4, re - off * chord.ey, im + off * chord.ex, weight);
      add(at + 6, re + along * chord.ex - across * chord.ey, im + along * chord.ey + across * chord.ex, weight);
      for (let j = from; j < to; j++) variance += weight * weight * profile.covariance[k * profile.count + j];
    }
    const middle = Math.floor((from + to) / 2);
    const own = profile.distanceNm[middle] < 0 ? levels.noiseInsulating : levels.noiseMetallic;
    const size = Math.hypot(means.re[middle], means.im[middle]);
    const turned = sdAlong(own, -means.im[middle] / size, means.re[middle] / size);
    const acrossSd = sdAlong(own, -chord.ey, chord.ex);
    bins[at + 3] = (Math.sqrt(Math.max(0, variance)) * (acrossSd > 0 ? turned / acrossSd : 1)) / size;
  }
  const { metallic } = levels;
  return {
    metallic: {
      re: (metallic.re * insulating.re + metallic.im * insulating.im) / size2,
      im: (metallic.im * insulating.re - metallic.re * insulating.im) / size2,
    },
    bins,
  };
}

/** Where each group of bins that are drawn as one begins, and one past the last bin. */
function groupsOf(profile: Profile, binNm: number): number[] {
  const { count, distanceNm } = profile;
  const near = count <= MOST_BINS ? Infinity : NEAR_BINS * binNm;
  const starts: number[] = [];
  for (let k = 0; k < count;) {
    starts.push(k);
    const isNear = Math.abs(distanceNm[k]) < near;
    let next = k + 1;
    if (!isNear) while (next < Math.min(count, k + TOGETHER) && !(Math.abs(distanceNm[next]) < near)) next++;
    k = next;
  }
  return [...starts, count];
}

/** Mean of the complex signal in each bin of the profile. */
function meanSignal(
  signal: Signal,
  stretch: Stretch,
  distanceNm: Float32Array,
  binNm: number,
  profile: Profile,
): { re: Float64Array; im: Float64Array } {
  const { count } = profile;
  const first = count === 0 ? 0 : Math.floor(profile.distanceNm[0] / binNm);
  const last = count === 0 ? -1 : Math.floor(profile.distanceNm[count - 1] / binNm);
  const index = new Int32Array(last - first + 1).fill(-1);
  for (let k = 0; k < count; k++) index[Math.floor(profile.distanceNm[k] / binNm) - first] = k;
  const re = new Float64Array(count);
  const im = new Float64Array(count);
  const many = new Int32Array(count);
  for (const p of stretch.pixels) {
    const b = Math.floor(distanceNm[p] / binNm) - first;
    const k = b < 0 || b >= index.length ? -1 : index[b];
    if (k < 0) continue;
    many[k]++;
    re[k] += signal.re[p];
    im[k] += signal.im === null ? 0 : signal.im[p];
  }
  for (let k = 0; k < count; k++) {
    re[k] /= many[k];
    im[k] /= many[k];
  }
  return { re, im };
}

function sdAlong(c: NoiseCovariance, ex: number, ey: number): number {
  return Math.sqrt(Math.max(0, ex * ex * c.rr + 2 * ex * ey * c.ri + ey * ey * c.ii));
}
