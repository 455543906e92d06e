import { type ColumnGroups, groupColumns, logOf } from "./column_groups.js";
import { BOX_PIXELS, flatGroups } from "./flat_groups.js";
import { groupVariance, type NoiseByLevel } from "./noise.js";
import { linkRows, type RowLinks } from "./row_links.js";
import { type RowOffsets, splitRowOffsets } from "./row_model.js";
import type { Scars } from "./scars.js";
import type { CleanSettings } from "./settings.js";

/** Differences of rows scatter by relief and texture too: the topography's as they do, those of amplitude and phase by no more than so many
 *  times the noise, as more are domains. */
const MOST_SPREAD = { topography: Infinity, signal: 2 };

/** Takes the offsets of the rows off a topography, in place.
 *  @returns their scatter before, independent from row to row, nm */
export function alignHeights(
  values: Float32Array,
  rows: number,
  cols: number,
  noise: NoiseByLevel,
  s: CleanSettings,
): number {
  const groups = groupColumns(values, rows, cols, false);
  const links = linkRows(
    groups,
    groupVariance(noise, groups, null),
    null,
    false,
    s.leastRowPixels,
    MOST_SPREAD.topography,
  );
  const offsets = splitRowOffsets(links, rows);
  // a lasting jump of all pixels from one row to the next is the tip's or the scanner's, never the sample's
  addRows(values, cols, (i) => -(offsets.white[i] + offsets.outlying[i] + offsets.jumps[i]));
  return offsets.whiteSd;
}

/** The rows' gains, and what was found on the way. */
export interface RowGains {
  readonly sd: number;
  readonly links: RowLinks;
  /** The amplitude. */
  readonly level: ColumnGroups;
  /** Groups of one state. */
  readonly flat: Uint8Array;
  /** Of rows that were aligned already, but for less than can matter; null where they have to be looked for again. */
  readonly scars: Scars | null;
  /** As they were left out on the way. */
  readonly roughScars: Scars;
}

/** Rows that moved by less than this share of a pixel's noise since scars were looked for, or of the noise of a box of flat pixels since those
 *  were, need not be searched again. */
const MOVED_SHARE = 0.2;

/** Brings the rows of the amplitude to one gain, in place.
 *
 *  Twice: rows of another gain would look like boundaries to the search for flat pixels. Scars are taken out in between: among all
 *  pixels of a row they are few, among the flat ones of a row full of walls they may be the most. */
export function alignGains(
  amplitude: Float32Array,
  rows: number,
  cols: number,
  relativeNoise: NoiseByLevel,
  scarsNow: () => Scars,
  s: CleanSettings,
): RowGains {
  const level = groupColumns(amplitude, rows, cols, false);
  const log = logOf(level);
  const variance = groupVariance(relativeNoise, log, level);
  const align = (flat: Uint8Array | null): { links: RowLinks; sd: number; moved: number } => {
    const links = linkRows(log, variance, flat, false, s.leastRowPixels, MOST_SPREAD.signal);
    const offsets = splitRowOffsets(links, rows);
    // neither the walk nor lasting jumps: a front between the states that runs along the rows looks like them
    const correction = (i: number): number => -(offsets.white[i] + offsets.outlying[i]);
    addRows(log.values, log.cols, correction);
    scaleRows(amplitude, cols, (i) => Math.exp(correction(i)));
    return { links, sd: offsets.whiteSd, moved: largest(correction, rows) };
  };
  const first = align(null);
  const roughScars = scarsNow();
  leaveOutGroups(log, roughScars, cols);
  const flat = flatGroups(log, variance, first.sd);
  const { links, sd, moved } = align(flat);
  const gainSd = Math.hypot(first.sd, sd);
  const little = MOVED_SHARE * Math.min(...relativeNoise.sds);
  return {
    sd: gainSd,
    links,
    level,
    flat: moved < little / BOX_PIXELS ** 0.5 ? flat : flatGroups(log, variance, gainSd),
    scars: moved < little ? roughScars : null,
    roughScars,
  };
}

/** References the rows of the phase to each other, in place.
 *  @returns the offsets taken off, and the scars where they need not be looked for again */
export function alignPhases(
  phase: Float32Array,
  rows: number,
  cols: number,
  gains: RowGains,
  noise: NoiseByLevel,
  scarsNow: () => Scars,
  s: CleanSettings,
): { offsets: RowOffsets; scars: Scars | null } {
  const groups = groupColumns(phase, rows, cols, true);
  leaveOutGroups(groups, gains.roughScars, cols);
  const variance = groupVariance(noise, groups, gains.level);
  const offsetsAmong = (flat: Uint8Array | null): RowOffsets =>
    splitRowOffsets(linkRows(groups, variance, flat, true, s.leastRowPixels, MOST_SPREAD.signal), rows);
  const all = (o: RowOffsets, i: number): number => o.white[i] + o.walk[i] + o.outlying[i] + o.jumps[i];
  // roughly first, to find the scars; what that may have taken off a wall along the rows is put back
  const rough = offsetsAmong(null);
  addRows(phase, cols, (i) => -all(rough, i));
  const scars = scarsNow();
  leaveOutGroups(groups, scars, cols);
  const offsets = offsetsAmong(gains.flat);
  const back = (i: number): number => all(rough, i) - all(offsets, i);
  addRows(phase, cols, back);
  const moved = largest((i) => (i > 0 ? back(i) - back(i - 1) : 0), rows);
  return { offsets, scars: moved < MOVED_SHARE * Math.min(...noise.sds) ? scars : null };
}

function largest(of: (row: number) => number, rows: number): number {
  let most = 0;
  for (let i = 0; i < rows; i++) most = Math.max(most, Math.abs(of(i)));
  return most;
}

/** Leaves out all groups with a scarred pixel.
 *  @param imageCols columns of the image that the scars are of */
function leaveOutGroups(groups: ColumnGroups, scars: Scars, imageCols: number): void {
  for (const [from, to] of scars.runs) {
    const row = Math.floor(from / imageCols);
    const group = (p: number): number => row * groups.cols + Math.floor((p - row * imageCols) / groups.each);
    groups.values.fill(Number.NaN, group(from), group(to - 1) + 1);
  }
}

function addRows(values: Float32Array, cols: number, offset: (row: number) => number): void {
  for (let i = 0, p = 0; p < values.length; i++) {
    const o = offset(i);
    for (const end = p + cols; p < end; p++) values[p] += o;
  }
}

function scaleRows(values: Float32Array, cols: number, factor: (row: number) => number): void {
  for (let i = 0, p = 0; p < values.length; i++) {
    const f = factor(i);
    for (const end = p + cols; p < end; p++) values[p] *= f;
  }
}
