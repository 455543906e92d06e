import path from "node:path";
import { InputError } from "../model/errors.js";
import type { Analysis, SettingRecord } from "../model/analysis.js";
import type { Cooldown } from "../model/cooldown.js";
import { deleteAnalyses } from "./forget.js";
import {
  canonical,
  contentHash,
  description,
  difference,
  identityOf,
  storedIdentity,
  workHash,
  type CooldownIdentity,
} from "./identity.js";
import type { Db } from "./open.js";
import { insertPictures } from "./pictures.js";
import { inWords } from "./problem.js";
import { insertAnalysisRows } from "./rows.js";

/** Number of the analysis that already holds this very work, or null. */
export function findAnalysis(db: Db, work: string): number | null {
  const id = db.prepare<[string], { id: number }>("SELECT id FROM analysis WHERE work_sha256 = ?").get(work);
  return id?.id ?? null;
}

/** What the database's newest analysis of the cooldown of this name was made from; null where it knows none.
 *  @param except analyses that do not count */
export function knownCooldown(db: Db, name: string, except: readonly number[] = []): CooldownIdentity | null {
  const id = db
    .prepare<[string], number>(
      `SELECT a.id FROM cooldown c JOIN analysis a ON a.cooldown_id = c.id WHERE c.name = ?
       ORDER BY a.made_at DESC, a.id DESC`,
    )
    .pluck()
    .all(name)
    .find((a) => !except.includes(a));
  if (id === undefined) return null;
  const described = db.prepare<[number], string>("SELECT description_json FROM analysis WHERE id = ?").pluck().get(id);
  return described === undefined ? null : storedIdentity(described);
}

/** Code of the notice that marks an analysis made while its run went on. */
export const WATCHED = "watched";

/** The analyses of a cooldown that were made while its run went on, with these settings: a longer one takes their place. */
export function watchedAnalyses(db: Db, name: string, settings: SettingRecord): number[] {
  return db
    .prepare<[string, string, string], number>(
      `SELECT a.id FROM cooldown c JOIN analysis a ON a.cooldown_id = c.id WHERE c.name = ? AND a.settings_json = ?
       AND EXISTS (SELECT 1 FROM notice n WHERE n.analysis_id = a.id AND n.code = ?)`,
    )
    .pluck()
    .all(name, canonical(settings), WATCHED);
}

/** Refuses a cooldown whose name already stands for something else; one that has grown is welcome.
 *  @param images SHA-256 of each frame's pixel values; null: only sample, region, branches and temperatures are compared
 *  @param except analyses that do not count
 *  Throws InputError showing both. */
export function checkName(db: Db, c: Cooldown, images: readonly string[] | null, except: readonly number[] = []): void {
  const known = knownCooldown(db, c.cooldown, except);
  if (known === null) return;
  const differ = difference(known, identityOf(c, images));
  if (differ === null) return;
  throw new InputError({
    at: c.yamlFile,
    problem: `the database already holds a cooldown "${c.cooldown}" with other content: ${differ.inFirst} there, ${differ.inSecond} here`,
    fix: `give this cooldown a name of its own, use another database, or remove the stored one with \`coldseam forget ${c.cooldown}\``,
  });
}

/** From the database's folder to another one, with forward slashes: so that both may be moved together. */
export function folderFrom(dbFile: string, folder: string): string {
  return (
    path
      .relative(path.dirname(path.resolve(dbFile)), folder)
      .split(path.sep)
      .join("/") || "."
  );
}

/** Saves an analysis in one transaction: all of it or none. Returns its number; an analysis of the same work is found, not repeated.
 *  One that is marked as made while its run went on takes the place of those like it, in the same transaction.
 *  Throws InputError where the cooldown's name is taken by other content. */
export function saveAnalysis(db: Db, analysis: Analysis, madeAt: Date): { id: number; alreadyThere: boolean } {
  const { cooldown } = analysis;
  const images = analysis.frames.map((f) => f.imagesSha256);
  const described = {
    ...description(cooldown, images),
    folder: folderFrom(db.name, path.dirname(cooldown.yamlFile)),
  };
  const content = contentHash(described);
  const work = workHash(content, analysis.settings, analysis.programVersion);
  const save = db.transaction(() => {
    const there = findAnalysis(db, work);
    if (there !== null) return { id: there, alreadyThere: true };
    const watched = analysis.notices.some((n) => n.code === WATCHED);
    const replaced = watched ? watchedAnalyses(db, cooldown.cooldown, analysis.settings) : [];
    checkName(db, cooldown, images, replaced);
    // Where the name is known its sample and region are these, or nothing stays of what they were said of.
    db.prepare(
      `INSERT INTO cooldown (name, sample, region) VALUES (?, ?, ?)
       ON CONFLICT (name) DO UPDATE SET sample = excluded.sample, region = excluded.region`,
    ).run(cooldown.cooldown, cooldown.sample, cooldown.region);
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
        canonical(described),
        content,
        work,
        cooldown.pixel.xNm,
        cooldown.pixel.yNm,
        cooldown.tip?.resolutionNm ?? null,
        cooldown.tip?.resolutionSdNm ?? null,
      );
    const id = Number(inserted.lastInsertRowid);
    insertAnalysisRows(db, id, analysis);
    insertPictures(db, id, analysis);
    deleteAnalyses(db, replaced);
    return { id, alreadyThere: false };
  });
  return inWords(db.name, () => save.immediate());
}
