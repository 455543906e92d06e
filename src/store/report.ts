import type { Db } from "./open.js";
import { floatsOf, type StoredFringeBins, type StoredPreview, type StoredProfileBins } from "./pictures.js";

/* What the page of a cooldown needs beyond the exported tables, a frame at a time. */

export interface StoredReportInfo {
  readonly cooldown: string;
  readonly sample: string;
  readonly region: string | null;
  readonly analysis: number;
  readonly analyses: number;
  readonly made_at: string;
  readonly program_version: string;
  readonly settings_json: string;
  readonly description_json: string;
  readonly pixel_x_nm: number;
  readonly pixel_y_nm: number;
  readonly tip_resolution_nm: number | null;
  readonly tip_resolution_sd_nm: number | null;
}

export function readReportInfo(db: Db, analysis: number): StoredReportInfo | null {
  return (
    db
      .prepare<[number], StoredReportInfo>(
        `SELECT c.name AS cooldown, c.sample, c.region, a.id AS analysis,
                (SELECT count(*) FROM analysis b WHERE b.cooldown_id = c.id) AS analyses, a.made_at, a.program_version,
                a.settings_json, a.description_json, a.pixel_x_nm, a.pixel_y_nm, a.tip_resolution_nm, a.tip_resolution_sd_nm
         FROM analysis a JOIN cooldown c ON c.id = a.cooldown_id WHERE a.id = ?`,
      )
      .get(analysis) ?? null
  );
}

export interface StoredSourceFile {
  readonly path: string;
  readonly sha256: string;
  readonly bytes: number;
}

export function readSources(db: Db, analysis: number): StoredSourceFile[] {
  return db
    .prepare<[number], StoredSourceFile>("SELECT path, sha256, bytes FROM source WHERE analysis_id = ? ORDER BY path")
    .all(analysis);
}

/** Every channel of a frame made small. */
export function readPreviews(db: Db, analysis: number, frame: number): StoredPreview[] {
  return db
    .prepare<[number, number], StoredPreview>(
      `SELECT frame, channel, image_rows AS "rows", image_cols AS cols, step_x, step_y, low, high, image FROM preview
       WHERE analysis_id = ? AND frame = ? ORDER BY channel`,
    )
    .all(analysis, frame);
}

export function readFrameProfileBins(db: Db, analysis: number, frame: number): StoredProfileBins[] {
  return db
    .prepare<[number, number], { wall: number; profile: number; w_nm: number; sigma_nm: number; bins: Uint8Array }>(
      "SELECT wall, profile, w_nm, sigma_nm, bins FROM profile_bins WHERE analysis_id = ? AND frame = ? ORDER BY wall, profile",
    )
    .all(analysis, frame)
    .map((r) => ({
      frame,
      wall: r.wall,
      profile: r.profile,
      wNm: r.w_nm,
      sigmaNm: r.sigma_nm,
      bins: floatsOf(r.bins),
    }));
}

export function readFrameFringeBins(db: Db, analysis: number, frame: number): StoredFringeBins[] {
  return db
    .prepare<
      [number, number],
      { wall: number; stretch: number; metallic_re: number; metallic_im: number; bins: Uint8Array }
    >(
      `SELECT wall, stretch, metallic_re, metallic_im, bins FROM fringe_bins WHERE analysis_id = ? AND frame = ?
       ORDER BY wall, stretch`,
    )
    .all(analysis, frame)
    .map((r) => ({
      frame,
      wall: r.wall,
      stretch: r.stretch,
      metallicRe: r.metallic_re,
      metallicIm: r.metallic_im,
      bins: floatsOf(r.bins),
    }));
}

/** A tracked domain in a frame, its place in nm of the frame (the exported tables add the drift). */
export interface StoredAppearance {
  readonly domain: number;
  readonly kind: "metallic" | "insulating";
  readonly area_nm2: number;
  readonly x_nm: number;
  readonly y_nm: number;
}

export function readAppearances(db: Db, analysis: number, frame: number): StoredAppearance[] {
  return db
    .prepare<[number, number], StoredAppearance>(
      `SELECT s.domain, d.kind, s.area_nm2, s.x_nm, s.y_nm FROM domain_appearance s
       JOIN domain d ON d.analysis_id = s.analysis_id AND d.domain = s.domain
       WHERE s.analysis_id = ? AND s.frame = ? ORDER BY s.domain`,
    )
    .all(analysis, frame);
}
