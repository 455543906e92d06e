import { InputError } from "../model/errors.js";
import { analysisTables } from "./analysis_tables.js";
import type { Db } from "./open.js";
import { inWords } from "./problem.js";

/** One analysis that is to go. */
export interface DoomedAnalysis {
  readonly id: number;
  readonly made_at: string;
  readonly program_version: string;
  readonly frames: number;
  readonly profiles: number;
}

/** What a removal would take away. */
export interface Removal {
  readonly cooldown: string;
  readonly sample: string;
  readonly region: string | null;
  readonly analyses: readonly DoomedAnalysis[];
  /** True where nothing of the cooldown stays. */
  readonly whole: boolean;
  /** The analysis that answers afterwards; null where the cooldown goes as a whole. */
  readonly answersThen: number | null;
}

/** Looks up what removing a cooldown, or one of its analyses, would take away; changes nothing. Throws InputError where there is no such
 *  cooldown, or the analysis is none of its. */
export function planRemoval(db: Db, name: string, analysis: number | null): Removal {
  const cooldown = db
    .prepare<[string], { id: number; sample: string; region: string | null }>(
      "SELECT id, sample, region FROM cooldown WHERE name = ?",
    )
    .get(name);
  if (cooldown === undefined) {
    const names = db.prepare<[], string>("SELECT name FROM cooldown ORDER BY name").pluck().all();
    throw new InputError({
      at: db.name,
      problem: `no cooldown "${name}"`,
      fix: names.length === 0 ? "the database is empty" : `it holds ${names.join(", ")}`,
    });
  }
  const all = db
    .prepare<[number], DoomedAnalysis>(
      `SELECT a.id, a.made_at, a.program_version,
              (SELECT count(*) FROM frame f WHERE f.analysis_id = a.id) AS frames,
              (SELECT count(*) FROM profile p WHERE p.analysis_id = a.id) AS profiles
       FROM analysis a WHERE a.cooldown_id = ? ORDER BY a.made_at, a.id`,
    )
    .all(cooldown.id);
  const analyses = analysis === null ? all : all.filter((a) => a.id === analysis);
  if (analysis !== null && analyses.length === 0)
    throw new InputError({
      at: db.name,
      problem: `cooldown "${name}" has no analysis ${analysis}`,
      fix: `its analyses are ${all.map((a) => a.id).join(", ")}`,
    });
  const stay = all.filter((a) => !analyses.includes(a));
  return {
    cooldown: name,
    sample: cooldown.sample,
    region: cooldown.region,
    analyses,
    whole: stay.length === 0,
    answersThen: stay.at(-1)?.id ?? null,
  };
}

/** Deletes analyses with all their rows; must run inside a transaction. */
export function deleteAnalyses(db: Db, ids: readonly number[]): void {
  // Children before parents, and by analysis, which every key begins with: no cascade has to search row by row.
  const tables = analysisTables(db).reverse();
  for (const id of ids) {
    for (const t of tables) db.prepare(`DELETE FROM ${t.name} WHERE analysis_id = ?`).run(id);
    db.prepare("DELETE FROM analysis WHERE id = ?").run(id);
  }
}

/** Removes in one transaction exactly what was planned. Throws InputError, and removes nothing, where another program has changed the
 *  cooldown since. */
export function remove(db: Db, planned: Removal): void {
  const run = db.transaction(() => {
    const now = planRemoval(db, planned.cooldown, planned.whole ? null : (planned.analyses[0]?.id ?? null));
    if (JSON.stringify(now) !== JSON.stringify(planned))
      throw new InputError({
        at: db.name,
        problem: `cooldown "${planned.cooldown}" was changed by another program meanwhile; nothing was removed`,
        fix: "run again and look at what is to be removed",
      });
    deleteAnalyses(
      db,
      planned.analyses.map((a) => a.id),
    );
    if (planned.whole) db.prepare("DELETE FROM cooldown WHERE name = ?").run(planned.cooldown);
  });
  inWords(db.name, () => run.immediate());
}
