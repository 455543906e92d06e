import { InputError, UsageError } from "../model/errors.js";
import { openForReading, type Db } from "../store/open.js";
import { cooldownNames, unknownCooldowns, type Selection } from "../store/read.js";

export interface SelectOptions {
  readonly db: string;
  readonly cooldown?: readonly string[];
  readonly sample?: string;
  readonly analysis?: string;
}

/** Opens the database and checks that what is asked for is in it. Throws InputError or UsageError where not. */
export function openSelected(o: SelectOptions): { db: Db; selection: Selection } {
  const db = openForReading(o.db);
  try {
    const unknown = unknownCooldowns(db, o.cooldown ?? []);
    const names = cooldownNames(db);
    if (unknown.length > 0)
      throw new InputError({
        at: o.db,
        problem: `no cooldown "${unknown[0] as string}"`,
        fix: names.length === 0 ? "the database is empty; ingest a cooldown first" : `it holds ${names.join(", ")}`,
      });
    let analysis: number | undefined;
    if (o.analysis !== undefined) {
      analysis = Number(o.analysis);
      const there =
        Number.isInteger(analysis) && db.prepare("SELECT 1 FROM analysis WHERE id = ?").get(analysis) !== undefined;
      if (!there)
        throw new UsageError(
          `--analysis ${o.analysis}: no such analysis in ${o.db}`,
          "`coldseam cooldowns --db FILE` lists the analyses",
        );
    }
    return {
      db,
      selection: {
        ...(o.cooldown === undefined ? {} : { cooldowns: o.cooldown }),
        ...(o.sample === undefined ? {} : { sample: o.sample }),
        ...(analysis === undefined ? {} : { analysis }),
      },
    };
  } catch (e) {
    db.close();
    throw e;
  }
}

const ADD_ONE = "`coldseam ingest COOLDOWN.yaml --db FILE` adds one";

/** What a list says that has nothing to show because the database holds nothing; null where it holds a cooldown. */
export const emptyText = (db: Db): string | null =>
  cooldownNames(db).length === 0 ? `no cooldown in this database yet; ${ADD_ONE}` : null;

/** The error of what cannot be made for want of any cooldown: none chosen, or none there. */
export function noCooldown(db: Db, file: string): InputError {
  return emptyText(db) === null
    ? new InputError({
        at: file,
        problem: "no cooldown for this choice",
        fix: "`coldseam cooldowns --db FILE` says what is in the file",
      })
    : new InputError({ at: file, problem: "this database holds no cooldown yet", fix: ADD_ONE });
}
