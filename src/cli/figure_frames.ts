import { inflateSync } from "node:zlib";
import {
  commonScale,
  framesFigure,
  must,
  paint,
  paintStates,
  rgbOf,
  valuesOf,
  word,
  type Figure,
  type FigureOptions,
  type FramePicture,
  type Row,
  type Shown,
} from "../figures/index.js";
import { InputError } from "../model/errors.js";
import type { Db } from "../store/open.js";
import { readAnalysisInfo, readPreview, readWalls } from "../store/pictures.js";
import { readMap } from "../store/read.js";
import { decodePreview, pngAddress } from "./figure_images.js";

/** Frames shown of each branch and cycle where none are named. */
const MOST_A_SERIES = 12;

type FrameImage = Pick<FramePicture, "href" | "imageRows" | "imageCols" | "stepX" | "stepY">;

/** The sheet of frames of one analysis.
 *  @param rows its table `temperature`
 *  @param wanted frames to show; none: evenly along each branch */
export async function gatherFrames(
  db: Db,
  analysis: number,
  rows: readonly Row[],
  wanted: readonly number[],
  shown: Shown,
  o: FigureOptions,
): Promise<Figure> {
  const info = readAnalysisInfo(db, analysis);
  if (info === null) throw new RangeError(`no analysis ${analysis}`);
  const chosen = wanted.length === 0 ? evenly(rows) : rows.filter((r) => wanted.includes(must(r, "frame")));
  const { images, scale } =
    shown === "states" ? await maps(db, analysis, chosen, o) : await channel(db, analysis, chosen, shown);
  const frames = chosen.flatMap((row): FramePicture[] => {
    const frame = must(row, "frame");
    const image = images.get(frame);
    const map = readMap(db, analysis, frame);
    if (image === undefined || map === null) return [];
    return [{ row, ...image, rows: map.rows, cols: map.cols, walls: readWalls(db, analysis, frame) }];
  });
  const unit = { phase: "rad", topography: "nm", amplitude: info.amplitudeUnit, states: "" }[shown];
  const { pixelXNm, pixelYNm } = info;
  return framesFigure({ frames, shown, scale, unit, pixelXNm, pixelYNm, total: rows.length }, o);
}

interface Images {
  readonly images: ReadonlyMap<number, FrameImage>;
  readonly scale: ReturnType<typeof commonScale> | null;
}

async function channel(
  db: Db,
  analysis: number,
  chosen: readonly Row[],
  shown: Exclude<Shown, "states">,
): Promise<Images> {
  const read = new Map<number, { values: Float32Array; image: Omit<FrameImage, "href"> }>();
  for (const row of chosen) {
    const p = readPreview(db, analysis, must(row, "frame"), shown);
    if (p === null) continue;
    const image = { imageRows: p.rows, imageCols: p.cols, stepX: p.step_x, stepY: p.step_y };
    read.set(p.frame, { values: valuesOf(await decodePreview(p)), image });
  }
  if (read.size === 0)
    throw new InputError({
      at: db.name,
      problem: `these frames have no ${shown}`,
      fix: "show another channel with --channel",
    });
  const scale = commonScale(
    shown,
    [...read.values()].map((r) => r.values),
  );
  const images = new Map<number, FrameImage>();
  for (const [frame, { values, image }] of read)
    images.set(frame, { ...image, href: await pngAddress(paint(values, scale), image.imageRows, image.imageCols) });
  return { images, scale };
}

async function maps(db: Db, analysis: number, chosen: readonly Row[], o: FigureOptions): Promise<Images> {
  const images = new Map<number, FrameImage>();
  for (const row of chosen) {
    const frame = must(row, "frame");
    const map = readMap(db, analysis, frame);
    if (map === null) continue;
    const rgba = paintStates(inflateSync(map.deflated), rgbOf(o.style.insulating), rgbOf(o.style.metallic));
    const href = await pngAddress(rgba, map.rows, map.cols);
    images.set(frame, { href, imageRows: map.rows, imageCols: map.cols, stepX: 1, stepY: 1 });
  }
  return { images, scale: null };
}

/** Up to twelve frames of every branch and cycle, evenly from the first to the last. */
function evenly(rows: readonly Row[]): Row[] {
  const series = new Map<string, Row[]>();
  for (const r of rows) {
    const key = `${word(r, "cycle")} ${word(r, "branch")}`;
    series.set(key, [...(series.get(key) ?? []), r]);
  }
  return [...series.values()].flatMap((own) =>
    own.length <= MOST_A_SERIES
      ? own
      : Array.from({ length: MOST_A_SERIES }, (_, k) => own[Math.round((k * (own.length - 1)) / (MOST_A_SERIES - 1))]),
  );
}
