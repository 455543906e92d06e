import { inflateSync } from "node:zlib";
import {
  commonScale,
  domainsFigure,
  driftFigure,
  framesFigure,
  fringeFigure,
  loopFigure,
  must,
  num,
  orbitFigure,
  paint,
  paintStates,
  rgbOf,
  valuesOf,
  wallFigure,
  widthsFigure,
  word,
  type Figure,
  type FigureOptions,
  type FramePicture,
  type FringeInput,
  type Row,
  type Shown,
} from "../figures/index.js";
import { InputError, UsageError } from "../model/errors.js";
import type { Db } from "../store/open.js";
import {
  hasPictures,
  readAnalysisInfo,
  readDriftPairs,
  readFringeBins,
  readPreview,
  readProfileBins,
  readWalls,
  type StoredAnalysisInfo,
} from "../store/pictures.js";
import { readMap, readTable, type Selection } from "../store/read.js";
import { tableNamed, type ExportedTable } from "../tables/columns.js";
import { decodePreview, pngAddress } from "./figure_images.js";

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
  frames: framesOf,
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

const rowsOf = (db: Db, table: string, sel: Selection): Row[] => [
  ...readTable(db, tableNamed(table) as ExportedTable, sel),
];

const nothing = (db: Db): InputError =>
  new InputError({ at: db.name, problem: "no cooldown for this choice", fix: "`coldseam cooldowns --db FILE` says what is in the file" });

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
  return { analysis: must(frames[0] as Row, "analysis") };
}

function withPictures(db: Db, one: One): One {
  if (!hasPictures(db, one.analysis))
    throw new InputError({
      at: db.name,
      problem: `analysis ${one.analysis} was made by a version that kept nothing to draw this from`,
      fix: "ingest its cooldown again to draw this; the tables and the other figures (loop, widths, domains) need nothing",
    });
  return one;
}

const byFrame = (rows: readonly Row[], frame: number): Row[] => rows.filter((r) => num(r, "frame") === frame);

function knownFrame(db: Db, rows: readonly Row[], frame: number): Row {
  const found = byFrame(rows, frame)[0];
  if (found === undefined)
    throw new UsageError(`--frame ${frame}: there is no such frame in this choice of ${db.name}`, `frames go from 0 to ${rows.length - 1}`);
  return found;
}

/** Frames shown a branch and cycle where none are named. */
const MOST_A_SERIES = 12;

async function framesOf(db: Db, sel: Selection, choice: FigureChoice, o: FigureOptions): Promise<Figure> {
  const one = withPictures(db, oneCooldown(db, sel));
  const info = readAnalysisInfo(db, one.analysis) as StoredAnalysisInfo;
  const rows = rowsOf(db, "temperature", one);
  const chosen = choice.frames.length > 0 ? choice.frames.map((f) => knownFrame(db, rows, f)) : evenly(rows);
  const shown = choice.channel;
  const pictures: { row: Row; values: Float32Array; image: { rows: number; cols: number; stepX: number; stepY: number } }[] = [];
  for (const row of shown === "states" ? [] : chosen) {
    const p = readPreview(db, one.analysis, must(row, "frame"), shown as Exclude<Shown, "states">);
    if (p === null) continue;
    pictures.push({
      row,
      values: valuesOf(await decodePreview(p)),
      image: { rows: p.rows, cols: p.cols, stepX: p.step_x, stepY: p.step_y },
    });
  }
  if (shown !== "states" && pictures.length === 0)
    throw new InputError({ at: db.name, problem: `these frames have no ${shown}`, fix: "show another channel with --channel" });
  const scale =
    shown === "states" ? null : commonScale(shown, pictures.map((p) => p.values));
  const frames: FramePicture[] = [];
  for (const row of chosen) {
    const frame = must(row, "frame");
    const map = readMap(db, one.analysis, frame);
    if (map === null) continue;
    const size = { row, rows: map.rows, cols: map.cols, walls: readWalls(db, one.analysis, frame) };
    if (shown === "states" || scale === null) {
      const rgba = paintStates(inflateSync(map.deflated), rgbOf(o.style.insulating), rgbOf(o.style.metallic));
      frames.push({ ...size, href: await pngAddress(rgba, map.rows, map.cols), imageRows: map.rows, imageCols: map.cols, stepX: 1, stepY: 1 });
      continue;
    }
    const p = pictures.find((q) => q.row === row);
    if (p === undefined) continue;
    const { image } = p;
    frames.push({
      ...size,
      href: await pngAddress(paint(p.values, scale), image.rows, image.cols),
      imageRows: image.rows,
      imageCols: image.cols,
      stepX: image.stepX,
      stepY: image.stepY,
    });
  }
  const unit = shown === "phase" ? "rad" : shown === "topography" ? "nm" : info.amplitudeUnit;
  return framesFigure(
    { frames, shown, scale, unit, pixelXNm: info.pixelXNm, pixelYNm: info.pixelYNm, total: rows.length },
    o,
  );
}

/** Up to twelve frames of every branch and cycle, evenly from the first to the last. */
function evenly(rows: readonly Row[]): Row[] {
  const series = new Map<string, Row[]>();
  for (const r of rows) {
    const key = `${word(r, "cycle")} ${word(r, "branch")}`;
    series.set(key, [...(series.get(key) ?? []), r]);
  }
  return [...series.values()].flatMap((own) => {
    if (own.length <= MOST_A_SERIES) return own;
    return Array.from({ length: MOST_A_SERIES }, (_, k) => own[Math.round((k * (own.length - 1)) / (MOST_A_SERIES - 1))] as Row);
  });
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
  if (bins === null) throw noSuch(db, "fitted profile there", "its row in `coldseam export walls` says why it has no fit");
  return wallFigure({ row, ...bins }, o);
}

/** Of sound profiles the one nearest the middle of their widths; of limits the lowest; else the one with the most pixels. */
function typicalProfile(rows: readonly Row[]): Row | null {
  const sound = rows.filter((r) => word(r, "flag") === "");
  const resolved = sound.filter((r) => num(r, "width_nm") !== null).sort((a, b) => must(a, "width_nm") - must(b, "width_nm"));
  if (resolved.length > 0) return resolved[resolved.length >> 1] as Row;
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
  const sorted = candidates.sort((a, b) => must(a, "adjusted_p") - must(b, "adjusted_p") || clearness(b) - clearness(a));
  const row = sorted[0];
  if (row === undefined)
    throw noSuch(db, "tested stretch of wall", "`coldseam export fringes` lists frame, wall and stretch of each; frames without an optical phase have none");
  const bins = readFringeBins(db, one.analysis, must(row, "frame"), must(row, "wall"), must(row, "stretch"));
  if (bins === null) throw noSuch(db, "fit for this stretch", "choose another one with --frame, --wall and --stretch");
  return { row, metallicRe: bins.metallicRe, metallicIm: bins.metallicIm, bins: bins.bins };
}

const noSuch = (db: Db, what: string, fix: string): InputError =>
  new InputError({ at: db.name, problem: `no ${what} for this choice`, fix });
