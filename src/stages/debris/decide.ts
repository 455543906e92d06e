import type { Tip } from "../../model/cooldown.js";
import { madInPlace, median, medianInPlace, SD_PER_MAD } from "../../numerics/quantile.js";
import { connectedComponents } from "../../raster/opencv.js";
import { distanceFromChord } from "./chord.js";
import { coreStrength } from "./effect.js";
import { type ChannelSums, CORE, type DebrisMap, type Grid, type HeightSums, MARGIN, type PairSums } from "./grid.js";
import { reaches } from "./reaches.js";
import type { DebrisSettings } from "./settings.js";
import { growSpots, smoothedMean, widen } from "./spots.js";

/** A mean departure must also be this many of its own standard deviations from zero. */
const SIGNIFICANT = 5;
/** Height that lends support to a departure in amplitude or phase, in standard deviations of the roughness. */
const SUPPORT = 2.5;
/** Distance from the chord of the two states that no gain or texture makes, and least departure in the amplitude with it. */
const OFF_CHORD = 0.12;
const LEAST_LOG = 0.2;
/** Pixels that the film's roughness is told from. */
const MOST_VALUES = 30_000;
/** Spots reach out to where the departure falls below this share of what it takes to be one. */
const REACH_SHARE = 0.5;

/** Debris from what all frames said. A pixel starts a spot where
 *  - its mean height stands `heightSigmas` above the roughness of the film; or
 *  - its mean departure in amplitude or phase is at least `effectSigmas` of the pixel noise and significant, with the same sign in
 *    `leastShare` of at least `leastFrames` frames; or
 *  - the same in fewer frames, with a bump of `SUPPORT` there; or
 *  - amplitude and phase depart as no mixture of the two states can.
 *  Spots grow to half the thresholds and get a margin for the tip. Of all this, the core is what `coreStrength` makes it. */
export function decide(grid: Grid, tip: Tip | null, s: DebrisSettings): DebrisMap {
  const { rows, cols } = grid;
  const n = rows * cols;
  const seed = new Uint8Array(n);
  const candidate = new Uint8Array(n);
  const byHeight = new Uint8Array(n);
  const height = grid.height === null ? null : heightScores(grid.height, rows, cols);
  if (height !== null) {
    for (let p = 0; p < n; p++) {
      if (height[p] > s.heightSigmas) seed[p] = 1;
      if (height[p] > REACH_SHARE * s.heightSigmas) candidate[p] = byHeight[p] = 1;
    }
  }
  // where no frame shows two states no domain can be taken for debris
  const least = grid.twoStateFrames > 0 ? Math.max(s.leastFrames, s.leastCoverage * grid.frames) : s.leastFrames;
  for (const channel of [grid.amplitude, grid.phase]) {
    if (channel !== null) markChannel(channel, least, height, rows, cols, s, seed, candidate);
  }
  markChannel(grid.looseAmplitude, Infinity, height, rows, cols, s, seed, candidate);
  markOffChord(grid.pair, rows, cols, seed, candidate);
  const spots = growSpots(seed, candidate, rows, cols, s.leastPixels);
  const { marginXPx, marginYPx } = reaches(grid.pixel, tip, s);
  const near = widen(spots, rows, cols, marginXPx, marginYPx);
  // the optical signal of a bump reaches further than its height, since the tip blurs it more; where the frames could not show how far
  // it reaches the margin is wider
  for (let p = 0; p < n; p++) if (spots[p] === 0) byHeight[p] = 0;
  const bumps = widen(byHeight, rows, cols, marginXPx, marginYPx);
  const unseen = byHeight.map((b, p) => (grid.amplitude.count[p] >= s.leastFrames ? 0 : b));
  const wider = widen(unseen, rows, cols, 2 * marginXPx, 2 * marginYPx);
  // one pixel more than is marked, so that between pixels the strength goes on
  const strength = coreStrength(grid, spots, bumps, widen(near, rows, cols, 1, 1), s.coreShare);
  const mask = new Uint8Array(n);
  for (let p = 0; p < n; p++) mask[p] = strength[p] >= 1 ? CORE : near[p] === 1 || wider[p] === 1 ? MARGIN : 0;
  return {
    originXNm: grid.originXNm,
    originYNm: grid.originYNm,
    pixel: grid.pixel,
    rows,
    cols,
    mask,
    strength,
    spots: n === 0 ? 0 : connectedComponents(spots, rows, cols, 8).count,
  };
}

/** Departures that no mixture of the two states can make are debris from the first frame on. */
function markOffChord(pair: PairSums, rows: number, cols: number, seed: Uint8Array, candidate: Uint8Array): void {
  if (pair.contrasts.length === 0) return;
  const contrast = {
    logRatio: median(pair.contrasts.map((c) => c.logRatio)),
    turnRad: median(pair.contrasts.map((c) => c.turnRad)),
  };
  const log = smoothedMean(pair.log, pair.count, rows, cols);
  const turn = smoothedMean(pair.turn, pair.count, rows, cols);
  for (let p = 0; p < seed.length; p++) {
    // beside a wall fringes take the phase off the chord, but leave the amplitude on it
    if (pair.count[p] === 0 || !(Math.abs(log.mean[p]) > LEAST_LOG)) continue;
    const sd = pair.noise / Math.sqrt(log.effective[p]);
    const distance = distanceFromChord(log.mean[p], turn.mean[p], contrast);
    if (distance > OFF_CHORD + SIGNIFICANT * sd) seed[p] = 1;
    if (Math.hypot(log.mean[p], turn.mean[p]) > REACH_SHARE * (OFF_CHORD + SIGNIFICANT * sd)) candidate[p] = 1;
  }
}

/** Marks cores (`seed`) and what belongs to them (`candidate`); seen in fewer than `leastFrames` frames only with a bump. */
function markChannel(
  channel: ChannelSums,
  leastFrames: number,
  height: Float32Array | null,
  rows: number,
  cols: number,
  s: DebrisSettings,
  seed: Uint8Array,
  candidate: Uint8Array,
): void {
  const { mean, effective } = smoothedMean(channel.sum, channel.count, rows, cols);
  for (let p = 0; p < seed.length; p++) {
    const frames = channel.count[p];
    const size = Math.abs(mean[p]);
    if (frames === 0 || !(size > REACH_SHARE * s.effectSigmas)) continue;
    const ownSd = 1 / Math.sqrt(effective[p]);
    if (size < REACH_SHARE * SIGNIFICANT * ownSd) continue;
    const seen = (mean[p] > 0 ? channel.above[p] : channel.below[p]) / frames;
    const supported = height !== null && height[p] > SUPPORT;
    if (seen >= 0.5 * s.leastShare && (leastFrames < Infinity || supported)) candidate[p] = 1;
    if (size < s.effectSigmas || size < SIGNIFICANT * ownSd || seen < s.leastShare) continue;
    if (frames >= leastFrames || supported) seed[p] = 1;
  }
}

/** Mean heights over the film in standard deviations: the film's roughness, which is the same in every frame, and the noise of the
 *  mean, which is larger where fewer frames have been. */
export function heightScores(sums: HeightSums, rows: number, cols: number): Float32Array {
  const { mean, effective } = smoothedMean(sums.sum, sums.count, rows, cols);
  const n = rows * cols;
  // a part of the pixels tells the medians
  const stride = Math.ceil(n / MOST_VALUES) | 1;
  const within = new Float64Array(Math.ceil(n / stride));
  const means = new Float64Array(within.length);
  const inverse = new Float64Array(within.length);
  let seen = 0;
  let repeated = 0;
  for (let p = 0; p < n; p += stride) {
    const c = sums.count[p];
    if (c === 0) continue;
    means[seen] = mean[p];
    inverse[seen++] = 1 / effective[p];
    if (c > 1) {
      const m = sums.sum[p] / c;
      within[repeated++] = Math.max(0, (sums.squares[p] / c - m * m) * (c / (c - 1)));
    }
  }
  const score = new Float32Array(n);
  if (seen === 0) return score;
  const centre = medianInPlace(means, seen);
  const total = SD_PER_MAD * madInPlace(means, seen, centre);
  const noise2 = repeated > 0 ? medianInPlace(within, repeated) : 0;
  const rough2 = Math.max(0.25 * total * total, total * total - noise2 * medianInPlace(inverse, seen));
  for (let p = 0; p < n; p++) {
    if (sums.count[p] === 0) continue;
    const sd = Math.sqrt(rough2 + noise2 / effective[p]);
    score[p] = sd > 0 ? (mean[p] - centre) / sd : 0;
  }
  return score;
}
