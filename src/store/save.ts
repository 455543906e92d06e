import path from "node:path";
import { InputError } from "../model/errors.js";
import type { Analysis } from "../model/analysis.js";
import type { Cooldown } from "../model/cooldown.js";
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

/** What the database's newest analysis of the cooldown of this name was made from; null where it knows none. */
export function knownCooldown(db: Db, name: string): CooldownIdentity | null {
  const known = db
    .prepare<[string], { description_json: string }>(
      `SELECT a.description_json FROM cooldown c JOIN newest_analysis n ON n.cooldown_id = c.id
       JOIN analysis a ON a.id = n.id WHERE c.name = ?`,
    )
    .get(name);
  return known === undefined ? null : storedIdentity(known.description_json);
}

/** Refuses a cooldown whose name already stands for something else; one that has grown is welcome.
 *  @param images SHA-256 of each frame's pixel values; null: only sample, region, branches and temperatures are compared
 *  Throws InputError showing both. */
export function checkName(db: Db, c: Cooldown, images: readonly string[] | null): void {
  const known = knownCooldown(db, c.cooldown);
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
    checkName(db, cooldown, images);
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
    return { id, alreadyThere: false };
  });
  return inWords(db.name, () => save.immediate());
}
