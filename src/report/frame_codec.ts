import { ByteReader, ByteWriter } from "./codec.js";
import type { FringeBinsData, ProfileBinsData, WallData } from "./data.js";

/* What is drawn of one frame, rounded to steps far finer than a line of the drawing. */

/** Steps of what is rounded: positions in nm; share of a bin and its sd; signals in units of the insulating level; sd of a phase in rad. */
export const STEP = { placeNm: 0.05, share: 5e-4, shareSd: 1e-4, signal: 2e-4, phaseSdRad: 2e-5 } as const;

const PROFILE_STEPS = [STEP.placeNm, STEP.share, STEP.shareSd];
const FRINGE_STEPS = [
  STEP.placeNm,
  STEP.signal,
  STEP.signal,
  STEP.phaseSdRad,
  STEP.signal,
  STEP.signal,
  STEP.signal,
  STEP.signal,
];

export function encodeWalls(walls: readonly WallData[]): Uint8Array {
  const w = new ByteWriter();
  w.whole(walls.length);
  for (const wall of walls) {
    w.whole(wall.wall);
    w.whole(wall.closed ? 1 : 0);
    w.float(wall.lengthNm);
    columns(w, wall.points, [STEP.placeNm, STEP.placeNm]);
  }
  return w.done();
}

export function decodeWalls(bytes: Uint8Array): WallData[] {
  const r = new ByteReader(bytes);
  return Array.from({ length: r.whole() }, () => ({
    wall: r.whole(),
    closed: r.whole() === 1,
    lengthNm: r.float(),
    points: readColumns(r, [STEP.placeNm, STEP.placeNm]),
  }));
}

export function encodeProfiles(list: readonly ProfileBinsData[]): Uint8Array {
  const w = new ByteWriter();
  w.whole(list.length);
  for (const p of list) {
    w.whole(p.wall);
    w.whole(p.profile);
    w.float(p.wNm);
    w.float(p.sigmaNm);
    columns(w, p.bins, PROFILE_STEPS);
  }
  return w.done();
}

export function decodeProfiles(bytes: Uint8Array): ProfileBinsData[] {
  const r = new ByteReader(bytes);
  return Array.from({ length: r.whole() }, () => ({
    wall: r.whole(),
    profile: r.whole(),
    wNm: r.float(),
    sigmaNm: r.float(),
    bins: readColumns(r, PROFILE_STEPS),
  }));
}

export function encodeFringes(list: readonly FringeBinsData[]): Uint8Array {
  const w = new ByteWriter();
  w.whole(list.length);
  for (const f of list) {
    w.whole(f.wall);
    w.whole(f.stretch);
    w.float(f.metallicRe);
    w.float(f.metallicIm);
    columns(w, f.bins, FRINGE_STEPS);
  }
  return w.done();
}

export function decodeFringes(bytes: Uint8Array): FringeBinsData[] {
  const r = new ByteReader(bytes);
  return Array.from({ length: r.whole() }, () => ({
    wall: r.whole(),
    stretch: r.whole(),
    metallicRe: r.float(),
    metallicIm: r.float(),
    bins: readColumns(r, FRINGE_STEPS),
  }));
}

/** A small matrix, row-major, column after column. */
function columns(w: ByteWriter, values: ArrayLike<number>, steps: readonly number[]): void {
  w.whole(values.length / steps.length);
  steps.forEach((step, k) => w.steps(values, k, steps.length, step));
}

function readColumns(r: ByteReader, steps: readonly number[]): Float32Array {
  const out = new Float32Array(r.whole() * steps.length);
  steps.forEach((step, k) => r.steps(out, k, steps.length, step));
  return out;
}
