import type { Analysis } from "../model/analysis.js";
import type { ChannelName } from "../model/cooldown.js";
import type { Db } from "./open.js";
import { inserter } from "./rows.js";

/** Little-endian bytes of single-precision numbers, as they are kept in a BLOB. */
function bytesOf(values: Float32Array): Uint8Array {
  const out = new Uint8Array(4 * values.length);
  const view = new DataView(out.buffer);
  for (let k = 0; k < values.length; k++) view.setFloat32(4 * k, values[k], true);
  return out;
}

export function floatsOf(bytes: Uint8Array): Float32Array {
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  return Float32Array.from({ length: bytes.byteLength >> 2 }, (_, k) => view.getFloat32(4 * k, true));
}

const allFinite = (v: Float32Array): boolean => v.every((x) => Number.isFinite(x));

/** Inserts what figures need; must run inside the transaction that made the analysis and its rows. A profile or stretch whose bins hold
 *  something that is no number is left without a picture: its own row says why. */
export function insertPictures(db: Db, id: number, analysis: Analysis): void {
  const preview = inserter(db, "preview");
  const profile = inserter(db, "profile_bins");
  const fringe = inserter(db, "fringe_bins");
  for (const f of analysis.frames) {
    const key = { analysis_id: id, frame: f.frame };
    for (const p of f.previews ?? [])
      preview({
        ...key,
        channel: p.channel,
        image_rows: p.rows,
        image_cols: p.cols,
        step_x: p.stepX,
        step_y: p.stepY,
        low: p.low,
        high: p.high,
        image: p.image,
      });
    for (const b of f.profileBins ?? [])
      if (b.bins.length > 0 && allFinite(b.bins) && Number.isFinite(b.wNm) && Number.isFinite(b.sigmaNm))
        profile({
          ...key,
          wall: b.wall,
          profile: b.profile,
          w_nm: b.wNm,
          sigma_nm: b.sigmaNm,
          bins: bytesOf(b.bins),
        });
    for (const t of f.fringes)
      if (t.drawn !== undefined && t.drawn.bins.length > 0 && allFinite(t.drawn.bins))
        fringe({
          ...key,
          wall: t.wall,
          stretch: t.stretch,
          metallic_re: t.drawn.metallic.re,
          metallic_im: t.drawn.metallic.im,
          bins: bytesOf(t.drawn.bins),
        });
  }
  const pair = inserter(db, "drift_pair");
  for (const p of analysis.driftPairs ?? [])
    pair({
      analysis_id: id,
      reference: p.reference,
      moving: p.moving,
      x_nm: p.xNm,
      y_nm: p.yNm,
      sd_x_nm: p.sdXNm,
      sd_y_nm: p.sdYNm,
      used: p.used ? 1 : 0,
    });
}

export interface StoredPreview {
  readonly frame: number;
  readonly channel: ChannelName;
  readonly rows: number;
  readonly cols: number;
  readonly step_x: number;
  readonly step_y: number;
  readonly low: number;
  readonly high: number;
  readonly image: Uint8Array;
}

/** One channel of one frame made small, or null where there is none. */
export function readPreview(db: Db, analysis: number, frame: number, channel: ChannelName): StoredPreview | null {
  return (
    db
      .prepare<[number, number, string], StoredPreview>(
        `SELECT frame, channel, image_rows AS "rows", image_cols AS cols, step_x, step_y, low, high, image FROM preview
         WHERE analysis_id = ? AND frame = ? AND channel = ?`,
      )
      .get(analysis, frame, channel) ?? null
  );
}

export interface StoredProfileBins {
  readonly frame: number;
  readonly wall: number;
  readonly profile: number;
  readonly wNm: number;
  readonly sigmaNm: number;
  /** Row-major: signed distance nm, share, its sd. */
  readonly bins: Float32Array;
}

export function readProfileBins(
  db: Db,
  analysis: number,
  frame: number,
  wall: number,
  profile: number,
): StoredProfileBins | null {
  const r = db
    .prepare<[number, number, number, number], { w_nm: number; sigma_nm: number; bins: Uint8Array }>(
      "SELECT w_nm, sigma_nm, bins FROM profile_bins WHERE analysis_id = ? AND frame = ? AND wall = ? AND profile = ?",
    )
    .get(analysis, frame, wall, profile);
  return r === undefined ? null : { frame, wall, profile, wNm: r.w_nm, sigmaNm: r.sigma_nm, bins: floatsOf(r.bins) };
}

export interface StoredFringeBins {
  readonly frame: number;
  readonly wall: number;
  readonly stretch: number;
  readonly metallicRe: number;
  readonly metallicIm: number;
  /** Row-major: signed distance nm; signal re, im; sd of its phase rad; null re, im; fit re, im. Units of the insulating level. */
  readonly bins: Float32Array;
}

export function readFringeBins(
  db: Db,
  analysis: number,
  frame: number,
  wall: number,
  stretch: number,
): StoredFringeBins | null {
  const r = db
    .prepare<[number, number, number, number], { metallic_re: number; metallic_im: number; bins: Uint8Array }>(
      "SELECT metallic_re, metallic_im, bins FROM fringe_bins WHERE analysis_id = ? AND frame = ? AND wall = ? AND stretch = ?",
    )
    .get(analysis, frame, wall, stretch);
  return r === undefined
    ? null
    : { frame, wall, stretch, metallicRe: r.metallic_re, metallicIm: r.metallic_im, bins: floatsOf(r.bins) };
}

export interface StoredPair {
  readonly reference: number;
  readonly moving: number;
  readonly x_nm: number;
  readonly y_nm: number;
  readonly sd_x_nm: number;
  readonly sd_y_nm: number;
  readonly used: number;
}

export function readDriftPairs(db: Db, analysis: number): StoredPair[] {
  return db
    .prepare<[number], StoredPair>(
      `SELECT reference, moving, x_nm, y_nm, sd_x_nm, sd_y_nm, used FROM drift_pair WHERE analysis_id = ?
       ORDER BY reference, moving`,
    )
    .all(analysis);
}

export interface StoredWall {
  readonly frame: number;
  readonly wall: number;
  readonly closed: boolean;
  readonly lengthNm: number;
  /** Interleaved x, y in nm of the frame, no drift added. */
  readonly points: Float32Array;
}

/** The traced walls of one frame. */
export function readWalls(db: Db, analysis: number, frame: number): StoredWall[] {
  return db
    .prepare<[number, number], { wall: number; closed: number; length_nm: number; points: Uint8Array }>(
      "SELECT wall, closed, length_nm, points FROM wall WHERE analysis_id = ? AND frame = ? ORDER BY wall",
    )
    .all(analysis, frame)
    .map((r) => ({
      frame,
      wall: r.wall,
      closed: r.closed === 1,
      lengthNm: r.length_nm,
      points: floatsOf(r.points),
    }));
}

/** True where the analysis was made with what figures need. */
export function hasPictures(db: Db, analysis: number): boolean {
  return (
    db.prepare<[number], number>("SELECT 1 FROM preview WHERE analysis_id = ?").pluck().get(analysis) !== undefined
  );
}

export interface StoredAnalysisInfo {
  readonly cooldown: string;
  readonly sample: string;
  readonly analysis: number;
  readonly pixelXNm: number;
  readonly pixelYNm: number;
  readonly tipResolutionNm: number | null;
  readonly tipResolutionSdNm: number | null;
  readonly programVersion: string;
  readonly amplitudeUnit: string;
}

/** What a figure says about where its numbers come from. */
export function readAnalysisInfo(db: Db, analysis: number): StoredAnalysisInfo | null {
  return (
    db
      .prepare<[number], StoredAnalysisInfo>(
        `SELECT c.name AS cooldown, c.sample, a.id AS analysis, a.pixel_x_nm AS pixelXNm, a.pixel_y_nm AS pixelYNm,
                a.tip_resolution_nm AS tipResolutionNm, a.tip_resolution_sd_nm AS tipResolutionSdNm,
                a.program_version AS programVersion, coalesce(a.description_json ->> '$.amplitudeUnit', '') AS amplitudeUnit
         FROM analysis a JOIN cooldown c ON c.id = a.cooldown_id WHERE a.id = ?`,
      )
      .get(analysis) ?? null
  );
}
