import { quantile } from "../../numerics/quantile.js";

/** Pixels looked at to learn what a channel's values are like; wild ones are few, or they would not be wild. */
const SAMPLE = 4096;
/** The share of the sample on either side that may itself be wild. */
const TAIL = 0.01;
/** A near-field amplitude this many times the largest of the frame, of either sign, is none. */
const AMPLITUDE_FACTOR = 50;
/** No relief of a film that a tip can scan lies farther than this from the rest, nm … */
const FARTHEST_NM = 1e5;
/** … nor so many times the range of the rest. */
const TOPOGRAPHY_FACTOR = 1000;

/** Values that no sample can have (a code for "no data", a lost bit, a spike of the electronics), set to NaN: a single one would otherwise
 *  outweigh all others in sums of squares.
 *  @param values row-major, unmeasured pixels NaN; changed in place
 *  @returns how many were taken out, and the farthest of them (NaN without any) */
export function leaveOutWild(
  values: Float32Array,
  channel: "amplitude" | "topography",
): { readonly pixels: number; readonly farthest: number } {
  const step = Math.max(1, Math.floor(values.length / SAMPLE));
  const sample: number[] = [];
  for (let p = 0; p < values.length; p += step) if (!Number.isNaN(values[p])) sample.push(values[p]);
  const none = { pixels: 0, farthest: Number.NaN };
  if (sample.length === 0) return none;
  const low = quantile(sample, TAIL);
  const high = quantile(sample, 1 - TAIL);
  const middle = quantile(sample, 0.5);
  const reach =
    channel === "amplitude"
      ? AMPLITUDE_FACTOR * Math.max(Math.abs(low), Math.abs(high))
      : Math.max(FARTHEST_NM, TOPOGRAPHY_FACTOR * (high - low));
  // a channel of nothing but zeros tells nothing of what it should be
  if (!(reach > 0)) return none;
  const centre = channel === "amplitude" ? 0 : middle;
  let pixels = 0;
  let farthest = centre;
  for (let p = 0; p < values.length; p++) {
    const off = Math.abs(values[p] - centre);
    if (!(off > reach)) continue;
    if (off > Math.abs(farthest - centre)) farthest = values[p];
    values[p] = Number.NaN;
    pixels++;
  }
  return pixels === 0 ? none : { pixels, farthest };
}
