import { createHash } from "node:crypto";
import { InputError } from "../model/errors.js";
import type { Analysis, SettingRecord } from "../model/analysis.js";
import type { Cooldown } from "../model/cooldown.js";
import { insertAnalysisRows } from "./rows.js";
import type { Db } from "./open.js";

const sha256 = (text: string): string => createHash("sha256").update(text).digest("hex");

/** JSON with sorted keys, so that equal content has equal text. */
function canonical(value: unknown): string {
  return JSON.stringify(value, (_key, v: unknown) =>
    v !== null && typeof v === "object" && !Array.isArray(v)
      ? Object.fromEntries(Object.entries(v).sort(([a], [b]) => (a < b ? -1 : 1)))
      : v,
  );
}

/** What the user described, free of where the files lie on this machine. */
export function description(c: Cooldown): Record<string, unknown> {
  return {
    sample: c.sample,
    cooldown: c.cooldown,
    region: c.region,
    pixel: c.pixel,
    tip: c.tip,
    photonEnergyMeV: c.photonEnergyMeV,
    filmThicknessNm: c.filmThicknessNm,
    amplitudeUnit: c.amplitudeUnit,
    frames: c.frames.map((f) => ({
      ...f,
      sources: Object.fromEntries(
        Object.entries(f.sources).map(([channel, s]) => [channel, { label: s.label, page: s.page, scale: s.scale, format: s.format }]),
      ),
    })),
  };
}

/** SHA-256 of the described cooldown with the SHA-256 of every source file. */
export function contentHash(c: Cooldown): string {
  return sha256(canonical({ description: description(c), sources: c.sources.filter((s) => s.path !== "cooldown.yaml").map((s) => [s.path, s.sha256]) }));
}

/** What makes two ingests the same work: content, settings and program version. */
export function workHash(c: Cooldown, settings: SettingRecord, programVersion: string): string {
  return sha256(canonical({ content: contentHash(c), settings, programVersion }));
}

/** Number of the analysis that already holds this very work, or null. */
export function findAnalysis(db: Db, work: string): number | null {
  const id = db.prepare<[string], { id: number }>("SELECT id FROM analysis WHERE work_sha256 = ?").get(work);
  return id?.id ?? null;
}

interface Known {
  readonly id: number;
  readonly sample: string;
  readonly region: string | null;
}

/** Refuses a cooldown whose name already stands for something else. Throws InputError naming both. */
export function checkName(db: Db, c: Cooldown): void {
  const known = db.prepare<[string], Known>("SELECT id, sample, region FROM cooldown WHERE name = ?").get(c.cooldown);
  if (known === undefined) return;
  const refuse = (what: string): never => {
    throw new InputError({
      at: c.yamlFile,
      problem: `the database already holds a cooldown "${c.cooldown}" with other content: ${what}`,
      fix: "give this cooldown a name of its own, or use another database with --db",
    });
  };
  if (known.sample !== c.sample) refuse(`sample "${known.sample}" there, "${c.sample}" here`);
  if (known.region !== c.region) refuse(`region "${known.region ?? "none"}" there, "${c.region ?? "none"}" here`);
  const last = db
    .prepare<[number], { description_json: string }>("SELECT description_json FROM analysis WHERE cooldown_id = ? ORDER BY id DESC LIMIT 1")
    .get(known.id);
  if (last === undefined) return;
  const before = JSON.parse(last.description_json) as { frames: { temperatureK: number; branch: string }[] };
  // A cooldown that has grown is welcome: every known frame must still be there, in order.
  const pool = c.frames.map((f) => `${f.branch} ${f.temperatureK}`);
  let at = -1;
  for (const f of before.frames) {
    at = pool.indexOf(`${f.branch} ${f.temperatureK}`, at + 1);
    if (at < 0) refuse(`its ${f.branch} frame at ${f.temperatureK} K is not among the ${c.frames.length} frames here`);
  }
}

/** Saves an analysis in one transaction: all of it or none. Returns its number; an analysis of the same work is found, not repeated.
 *  Throws InputError where the cooldown's name is taken by other content. */
export function saveAnalysis(db: Db, analysis: Analysis, madeAt: Date): { id: number; alreadyThere: boolean } {
  const { cooldown } = analysis;
  const work = workHash(cooldown, analysis.settings, analysis.programVersion);
  return db
    .transaction(() => {
      const there = findAnalysis(db, work);
      if (there !== null) return { id: there, alreadyThere: true };
      checkName(db, cooldown);
      db.prepare("INSERT INTO cooldown (name, sample, region) VALUES (?, ?, ?) ON CONFLICT (name) DO NOTHING").run(
        cooldown.cooldown,
        cooldown.sample,
        cooldown.region,
      );
      const owner = db.prepare<[string], { id: number }>("SELECT id FROM cooldown WHERE name = ?").get(cooldown.cooldown);
      const inserted = db
        .prepare(
          `INSERT INTO analysis (cooldown_id, made_at, program_version, settings_json, description_json, content_sha256,
             work_sha256, pixel_x_nm, pixel_y_nm, tip_resolution_nm, tip_resolution_sd_nm)
           VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)`,
        )
        .run(
          owner?.id,
          madeAt.toISOString(),
          analysis.programVersion,
          canonical(analysis.settings),
          canonical(description(cooldown)),
          contentHash(cooldown),
          work,
          cooldown.pixel.xNm,
          cooldown.pixel.yNm,
          cooldown.tip?.resolutionNm ?? null,
          cooldown.tip?.resolutionSdNm ?? null,
        );
      const id = Number(inserted.lastInsertRowid);
      insertAnalysisRows(db, id, analysis);
      return { id, alreadyThere: false };
    })
    .immediate();
}
