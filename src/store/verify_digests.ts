import type { SettingRecord } from "../model/analysis.js";
import { contentHash, workHash } from "./identity.js";
import type { Db } from "./open.js";

interface AnalysisRow {
  readonly id: number;
  readonly place: string;
  readonly program_version: string;
  readonly settings_json: string;
  readonly description_json: string;
  readonly content_sha256: string;
  readonly work_sha256: string;
}

interface Described {
  readonly frames: readonly { readonly sources: Readonly<Record<string, { readonly sha256?: string }>> }[];
}

/** Computes every analysis's digests anew from what is stored, and looks for each image file among its sources. */
export function digestProblems(db: Db): { looked: number; problems: string[] } {
  const problems: string[] = [];
  const sources = db.prepare<[number], string>("SELECT sha256 FROM source WHERE analysis_id = ?").pluck();
  let looked = 0;
  const rows = db.prepare<[], AnalysisRow>(
    `SELECT a.id, c.name || ', analysis ' || a.id AS place, a.program_version, a.settings_json, a.description_json,
            a.content_sha256, a.work_sha256
     FROM analysis a JOIN cooldown c ON c.id = a.cooldown_id`,
  );
  for (const a of rows.iterate()) {
    looked++;
    const described = JSON.parse(a.description_json) as Described;
    const content = contentHash(described);
    if (content !== a.content_sha256) problems.push(`${a.place}: the content's SHA-256 is another`);
    const settings = JSON.parse(a.settings_json) as SettingRecord;
    if (workHash(a.content_sha256, settings, a.program_version) !== a.work_sha256)
      problems.push(`${a.place}: the work's SHA-256 is another`);
    const known = new Set(sources.all(a.id));
    const images = new Set(described.frames.flatMap((f) => Object.values(f.sources).map((s) => s.sha256 ?? "none")));
    for (const sha of images)
      if (!known.has(sha))
        problems.push(`${a.place}: an image file of SHA-256 ${sha.slice(0, 12)}… is not among its sources`);
  }
  return { looked, problems };
}

/** A source file of one analysis, and the folder it is relative to as seen from the database's folder (null: not stored). */
export interface StoredSource {
  readonly place: string;
  readonly folder: string | null;
  readonly path: string;
  readonly sha256: string;
  readonly bytes: number;
}

/** The sources of every analysis, each file once a folder. */
export function storedSources(db: Db): StoredSource[] {
  return db
    .prepare<[], StoredSource>(
      `SELECT min(c.name || ', analysis ' || a.id) AS place, a.description_json ->> '$.folder' AS folder, s.path, s.sha256, s.bytes
       FROM source s JOIN analysis a ON a.id = s.analysis_id JOIN cooldown c ON c.id = a.cooldown_id
       GROUP BY folder, s.path, s.sha256, s.bytes ORDER BY min(a.id), s.path`,
    )
    .all();
}
