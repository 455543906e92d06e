import {
  domainsFigure,
  driftFigure,
  fringeFigure,
  loopFigure,
  must,
  num,
  orbitFigure,
  wallFigure,
  widthsFigure,
  word,
  type Figure,
  type FigureOptions,
  type FringeInput,
  type Row,
  type Shown,
} from "../figures/index.js";
import { InputError, UsageError } from "../model/errors.js";
import type { Db } from "../store/open.js";
import { hasPictures, readDriftPairs, readFringeBins, readProfileBins } from "../store/pictures.js";
import { readTable, type Selection } from "../store/read.js";
import { TABLES, type ExportedTable } from "../tables/columns.js";
import { gatherFrames } from "./figure_frames.js";
import { noCooldown } from "./select.js";

/** Which part of a cooldown a figure shows; what is null or empty is chosen. */
export interface FigureChoice {
  readonly frames: readonly number[];
  readonly wall: number | null;
  readonly profile: number | null;
  readonly stretch: number | null;
  readonly channel: Shown;
}

type Gather = (db: Db, sel: Selection, choice: FigureChoice, o: FigureOptions) => Figure | Promise<Figure>;

const KINDS: Readonly<Record<string, Gather>> = {
  loop: (db, sel, _, o) => {
    const frames = rowsOf(db, "temperature", sel);
    if (frames.length === 0) throw nothing(db);
    return loopFigure({ frames, loops: rowsOf(db, "loops", sel) }, o);
  },
  frames: (db, sel, choice, o) => {
    const one = withPictures(db, oneCooldown(db, sel));
    const rows = rowsOf(db, "temperature", one);
    for (const f of choice.frames) mustHave(db, rows, f);
    return gatherFrames(db, one.analysis, rows, choice.frames, choice.channel, o);
  },
  widths: (db, sel, _, o) => {
    const one = oneCooldown(db, sel);
    return widthsFigure({ frames: rowsOf(db, "temperature", one), walls: rowsOf(db, "walls", one) }, o);
  },
  wall: wallOf,
  fringe: (db, sel, choice, o) => fringeFigure(fringeOf(db, sel, choice), o),
  drift: (db, sel, _, o) => {
    const one = withPictures(db, oneCooldown(db, sel));
    const pairs = readDriftPairs(db, one.analysis).map((p): Row => ({ ...p }));
    return driftFigure({ frames: rowsOf(db, "temperature", one), pairs }, o);
  },
  domains: (db, sel, _, o) => {
    const one = oneCooldown(db, sel);
    return domainsFigure(
      {
        frames: rowsOf(db, "temperature", one),
        domains: rowsOf(db, "domains", one),
        appearances: rowsOf(db, "domain-frames", one),
      },
      o,
    );
  },
  orbit: (db, sel, choice, o) => orbitFigure(fringeOf(db, sel, choice), o),
};

export const FIGURE_KINDS: readonly string[] = Object.keys(KINDS);

/** Reads what a figure of this kind needs and draws it. Throws InputError where it is not there, UsageError where the choice is wrong. */
export async function gatherFigure(
  kind: string,
  db: Db,
  sel: Selection,
  choice: FigureChoice,
  o: FigureOptions,
): Promise<Figure> {
  const gather = KINDS[kind];
  if (gather === undefined) throw new RangeError(`no figure ${kind}`);
  return gather(db, sel, choice, o);
}

const TABLE: Readonly<Record<string, ExportedTable>> = Object.fromEntries(TABLES.map((t) => [t.name, t]));

const rowsOf = (db: Db, table: string, sel: Selection): Row[] => [...readTable(db, TABLE[table], sel)];

const nothing = (db: Db): InputError => noCooldown(db, db.name);

type One = Selection & { readonly analysis: number };

/** The one analysis that the choice leads to. */
function oneCooldown(db: Db, sel: Selection): One {
  const frames = rowsOf(db, "temperature", sel);
  const names = [...new Set(frames.map((r) => word(r, "cooldown")))];
  if (names.length === 0) throw nothing(db);
  if (names.length > 1)
    throw new UsageError(
      `this figure shows one cooldown, and the choice holds ${names.length}`,
      `name one with --cooldown: ${names.slice(0, 12).join(", ")}${names.length > 12 ? ", …" : ""}`,
    );
  return { analysis: must(frames[0], "analysis") };
}

function withPictures(db: Db, one: One): One {
  if (!hasPictures(db, one.analysis))
    throw new InputError({
      at: db.name,
      problem: `analysis ${one.analysis} was made by a version that kept nothing to draw this from`,
      fix:
        "ingest its cooldown again to draw this; if ingest finds it done already, `coldseam forget COOLDOWN --analysis N` first. " +
        "loop, widths and domains can be drawn as it is",
    });
  return one;
}

function mustHave(db: Db, rows: readonly Row[], frame: number): void {
  if (!rows.some((r) => num(r, "frame") === frame))
    throw new UsageError(
      `--frame ${frame}: there is no such frame in this choice of ${db.name}`,
      `its frames go from 0 to ${rows.length - 1}`,
    );
}

function wallOf(db: Db, sel: Selection, choice: FigureChoice, o: FigureOptions): Figure {
  const one = withPictures(db, oneCooldown(db, sel));
  const all = rowsOf(db, "walls", one);
  const candidates = all.filter(
    (r) =>
      (choice.frames.length === 0 || choice.frames.includes(must(r, "frame"))) &&
      (choice.wall === null || num(r, "wall") === choice.wall) &&
      (choice.profile === null || num(r, "profile") === choice.profile),
  );
  const row = typicalProfile(candidates);
  if (row === null) throw noSuch(db, "profile", "`coldseam export walls` lists frame, wall and profile of each");
  const bins = readProfileBins(db, one.analysis, must(row, "frame"), must(row, "wall"), must(row, "profile"));
  if (bins === null)
    throw noSuch(db, "fitted profile there", "its row in `coldseam export walls` says why it has no fit");
  return wallFigure({ row, ...bins }, o);
}

/** Of sound profiles the one nearest the middle of their widths; of limits the lowest; else the one with the most pixels. */
function typicalProfile(rows: readonly Row[]): Row | null {
  const sound = rows.filter((r) => word(r, "flag") === "");
  const resolved = sound
    .filter((r) => num(r, "width_nm") !== null)
    .sort((a, b) => must(a, "width_nm") - must(b, "width_nm"));
  if (resolved.length > 0) return resolved[resolved.length >> 1];
  const most = (list: readonly Row[]): Row | null =>
    list.reduce<Row | null>((best, r) => (best === null || must(r, "pixels") > must(best, "pixels") ? r : best), null);
  return most(sound) ?? most(rows);
}

function fringeOf(db: Db, sel: Selection, choice: FigureChoice): FringeInput {
  const one = withPictures(db, oneCooldown(db, sel));
  const candidates = rowsOf(db, "fringes", one).filter(
    (r) =>
      (choice.frames.length === 0 || choice.frames.includes(must(r, "frame"))) &&
      (choice.wall === null || num(r, "wall") === choice.wall) &&
      (choice.stretch === null || num(r, "stretch") === choice.stretch),
  );
  // the clearest: the largest contrast over its sd among those of the smallest adjusted p
  const clearness = (r: Row): number => Math.abs(num(r, "contrast_rad") ?? 0) / (num(r, "contrast_sd_rad") ?? Infinity);
  const sorted = candidates.sort(
    (a, b) => must(a, "adjusted_p") - must(b, "adjusted_p") || clearness(b) - clearness(a),
  );
  const row = sorted[0];
  if (row === undefined)
    throw noSuch(
      db,
      "tested stretch of wall",
      "`coldseam export fringes` lists frame, wall and stretch of each; frames without an optical phase have none",
    );
  const bins = readFringeBins(db, one.analysis, must(row, "frame"), must(row, "wall"), must(row, "stretch"));
  if (bins === null) throw noSuch(db, "fit for this stretch", "choose another one with --frame, --wall and --stretch");
  return { row, metallicRe: bins.metallicRe, metallicIm: bins.metallicIm, bins: bins.bins };
}

const noSuch = (db: Db, what: string, fix: string): InputError =>
  new InputError({ at: db.name, problem: `no ${what} for this choice`, fix });
