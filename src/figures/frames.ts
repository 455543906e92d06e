import { hexOf } from "./colour.js";
import type { Figure, FigureOptions } from "./figure.js";
import { marker } from "./marks.js";
import type { ColourScale, Shown } from "./paint.js";
import { must, num, word, type Cell, type Row } from "./rows.js";
import { niceTicks, numberText, tickLabels } from "./scale.js";
import { element, group, label, line, pt, textWidth } from "./svg.js";

/** One frame with its image, already in colours. */
export interface FramePicture {
  /** Its row of the table `temperature`. */
  readonly row: Row;
  /** `data:` address of a PNG. */
  readonly href: string;
  /** Size of the image, and pixels of the frame that each of its pixels stands for. */
  readonly imageRows: number;
  readonly imageCols: number;
  readonly stepX: number;
  readonly stepY: number;
  /** Size of the frame, pixels. */
  readonly rows: number;
  readonly cols: number;
  /** Lines of the walls, interleaved x and y in nm of the frame. */
  readonly walls: readonly { readonly points: ArrayLike<number>; readonly closed: boolean; readonly lengthNm: number }[];
}

export interface FramesInput {
  readonly frames: readonly FramePicture[];
  readonly shown: Shown;
  /** null for maps of the states. */
  readonly scale: ColourScale | null;
  readonly unit: string;
  readonly pixelXNm: number;
  readonly pixelYNm: number;
  /** Frames of the cooldown in all. */
  readonly total: number;
}

const GAP = 3;
const LEAST_CELL = 42;

/** A sheet of frames along the loop, all in the cooldown's coordinates: the sample stands still, the domains move. */
export function framesFigure(input: FramesInput, o: FigureOptions): Figure {
  const s = o.style;
  const { frames, pixelXNm, pixelYNm } = input;
  const margin = 3;
  const width = o.widthPt - 2 * margin;
  const columns = Math.max(1, Math.min(frames.length, Math.floor((width + GAP) / (LEAST_CELL + GAP))));
  const cell = (width - GAP * (columns - 1)) / columns;
  const first = frames[0];
  const windowX = first === undefined ? 1 : first.cols * pixelXNm;
  const windowY = first === undefined ? 1 : first.rows * pixelYNm;
  const perNm = cell / windowX;
  const height = windowY * perNm;
  const head = s.textPt * 1.35;
  const originX = middle(frames.map((f) => num(f.row, "drift_x_nm")));
  const originY = middle(frames.map((f) => num(f.row, "drift_y_nm")));

  const parts: string[] = [];
  const rows: Cell[][] = [];
  let lastBranch = "";
  let column = 0;
  let top = margin;
  frames.forEach((f, k) => {
    const branch = `${word(f.row, "cycle")} ${word(f.row, "branch")}`;
    if (k > 0 && (column === columns || branch !== lastBranch)) {
      top += head + height + GAP + (branch === lastBranch ? 0 : 2);
      column = 0;
    }
    lastBranch = branch;
    const left = margin + column * (cell + GAP);
    parts.push(heading(f.row, left, top, cell, o));
    parts.push(picture(f, k, left, top + head, { cell, height, perNm, originX, originY }, input, o));
    column++;
    rows.push([
      num(f.row, "frame"),
      word(f.row, "branch"),
      num(f.row, "cycle"),
      num(f.row, "temperature_K"),
      num(f.row, "drift_x_nm"),
      num(f.row, "drift_y_nm"),
      num(f.row, "metallic_fraction"),
      f.walls.length,
      f.walls.reduce((a, w) => a + w.lengthNm, 0),
    ]);
  });
  const bottom = top + head + height + 5;
  parts.push(scaleBar(margin, bottom, windowX, perNm, o));
  parts.push(input.scale === null ? stateKey(o.widthPt - margin, bottom, o) : colourBar(o.widthPt - margin, bottom, width, input, o));
  const notPlaced = frames.filter((f) => num(f.row, "drift_x_nm") === null).length;
  return {
    widthPt: o.widthPt,
    heightPt: bottom + 2.6 * s.textPt + 4,
    style: s,
    title: `${frames.length} frames of ${word(first?.row ?? {}, "cooldown")} along the loop`,
    notes: [
      "Frames in the coordinates of the cooldown, so that the sample stands still; lines: walls between the two states; number at the right: metallic fraction.",
      ...(frames.length < input.total ? [`${frames.length} of ${input.total} frames are shown.`] : []),
      ...(notPlaced > 0 ? [`${notPlaced} frames could not be placed and stand where they were scanned.`] : []),
    ],
    body: parts.join(""),
    table: {
      columns: ["frame", "branch", "cycle", "temperature_K", "drift_x_nm", "drift_y_nm", "metallic_fraction", "walls", "walls_length_nm"],
      rows,
    },
  };
}

/** Middle of the range, so that the window suits all frames as well as it can. */
function middle(values: readonly (number | null)[]): number {
  const known = values.filter((v) => v !== null);
  return known.length === 0 ? 0 : (Math.min(...known) + Math.max(...known)) / 2;
}

function heading(r: Row, left: number, top: number, cell: number, o: FigureOptions): string {
  const s = o.style;
  const cooling = word(r, "branch") === "cooling";
  const y = top + s.textPt;
  const look = { size: s.textPt, fill: s.ink };
  const fraction = num(r, "metallic_fraction");
  const temperature = `${Number(must(r, "temperature_K").toFixed(1))} K`;
  const share = fraction === null ? "?" : numberText(fraction, 2);
  const both = textWidth(temperature, s.textPt) + textWidth(share, s.textPt) + 10 <= cell;
  const colour = s.series[cooling ? 0 : 1];
  return (
    marker(left + 2.6, y - 0.36 * s.textPt, { shape: cooling ? "down" : "up", size: 4, fill: cooling ? colour : s.background, stroke: colour, strokeWidth: 0.8 }) +
    label(left + 6.4, y, temperature, look, { "data-frame": num(r, "frame"), "data-temperature-k": num(r, "temperature_K"), "data-fraction": fraction }) +
    (both ? label(left + cell, y, share, { ...look, anchor: "end" }) : "")
  );
}

interface Place {
  readonly cell: number;
  readonly height: number;
  readonly perNm: number;
  readonly originX: number;
  readonly originY: number;
}

function picture(f: FramePicture, k: number, left: number, top: number, p: Place, input: FramesInput, o: FigureOptions): string {
  const s = o.style;
  const { pixelXNm, pixelYNm } = input;
  // the window begins at the edge of a pixel, half a pixel before its centre
  const x0 = left + ((num(f.row, "drift_x_nm") ?? p.originX) - p.originX) * p.perNm;
  const y0 = top + ((num(f.row, "drift_y_nm") ?? p.originY) - p.originY) * p.perNm;
  const x = (nm: number): number => x0 + (nm + pixelXNm / 2) * p.perNm;
  const y = (nm: number): number => y0 + (nm + pixelYNm / 2) * p.perNm;
  const box = { x: pt(left), y: pt(top), width: pt(p.cell), height: pt(p.height) };
  const image = element("image", {
    x: pt(x0),
    y: pt(y0),
    width: pt(f.imageCols * f.stepX * pixelXNm * p.perNm),
    height: pt(f.imageRows * f.stepY * pixelYNm * p.perNm),
    preserveAspectRatio: "none",
    style: "image-rendering:pixelated",
    href: f.href,
    "xlink:href": f.href,
  });
  const d = f.walls.map((w) => wallPath(w, x, y)).join("");
  const walls =
    d === ""
      ? ""
      : element("path", { d, fill: "none", stroke: s.wallUnder, "stroke-width": 1.2, "stroke-linejoin": "round" }) +
        element("path", { class: "walls", d, fill: "none", stroke: s.wall, "stroke-width": 0.5, "stroke-linejoin": "round" });
  return (
    element("clipPath", { id: `frame-${k}` }, element("rect", box)) +
    group({ "clip-path": `url(#frame-${k})` }, element("rect", { ...box, fill: s.faint, "fill-opacity": 0.35 }), image, walls) +
    element("rect", { ...box, fill: "none", stroke: s.ink, "stroke-width": 0.4 })
  );
}

/** The points of a wall, thinned to what the drawing can show. */
function wallPath(w: { points: ArrayLike<number>; closed: boolean }, x: (nm: number) => number, y: (nm: number) => number): string {
  let d = "";
  let lastX = NaN;
  let lastY = NaN;
  const n = w.points.length / 2;
  for (let k = 0; k < n; k++) {
    const [px, py] = [x(w.points[2 * k]), y(w.points[2 * k + 1])];
    if (k > 0 && k < n - 1 && Math.hypot(px - lastX, py - lastY) < 0.35) continue;
    d += `${k === 0 ? "M" : "L"}${pt(px)} ${pt(py)}`;
    lastX = px;
    lastY = py;
  }
  return w.closed ? `${d}Z` : d;
}

function scaleBar(left: number, top: number, windowNm: number, perNm: number, o: FigureOptions): string {
  const s = o.style;
  const ticks = niceTicks(0, 0.8 * windowNm, 1);
  const nm = ticks[ticks.length - 1];
  const text = nm >= 1000 ? `${Number((nm / 1000).toFixed(2))} µm` : `${nm} nm`;
  const y = top + 3;
  return (
    line(left, y, left + nm * perNm, y, { stroke: s.ink, "stroke-width": 2, "data-length-nm": nm }) +
    label(left, y + s.textPt + 4, text, { size: s.textPt, fill: s.ink })
  );
}

function colourBar(right: number, top: number, room: number, input: FramesInput, o: FigureOptions): string {
  const s = o.style;
  const scale = input.scale as ColourScale;
  const wide = Math.min(100, 0.42 * room);
  const left = right - wide - 8;
  const steps = 64;
  const parts: string[] = [];
  for (let k = 0; k < steps; k++)
    parts.push(
      element("rect", { x: pt(left + (wide * k) / steps), y: pt(top), width: pt(wide / steps + 0.3), height: "6", fill: hexOf(scale.map((k + 0.5) / steps)) }),
    );
  parts.push(element("rect", { x: pt(left), y: pt(top), width: pt(wide), height: "6", fill: "none", stroke: s.ink, "stroke-width": 0.4 }));
  const ticks = scale.cyclic ? [-Math.PI, 0, Math.PI] : niceTicks(scale.low, scale.high, 3);
  const labels = scale.cyclic ? ["−π", "0", "π"] : tickLabels(ticks);
  ticks.forEach((t, k) => {
    const x = left + ((t - scale.low) / (scale.high - scale.low)) * wide;
    parts.push(line(x, top + 6, x, top + 8, { stroke: s.ink, "stroke-width": 0.4 }));
    parts.push(label(x, top + 8.5 + s.textPt, labels[k], { size: s.textPt, fill: s.ink, anchor: "middle" }));
  });
  const name = { amplitude: "Amplitude", phase: "Phase", topography: "Height", states: "" }[input.shown];
  const unit = input.unit === "" ? "" : ` (${input.unit})`;
  parts.push(label(left - 5, top + 6, `${name}${unit}`, { size: s.textPt, fill: s.ink, anchor: "end" }));
  return group({ class: "colour-bar", "data-low": scale.low, "data-high": scale.high }, ...parts);
}

function stateKey(right: number, top: number, o: FigureOptions): string {
  const s = o.style;
  const item = (at: number, fill: string, text: string): string =>
    element("rect", { x: pt(at), y: pt(top), width: "7", height: "7", fill, stroke: s.ink, "stroke-width": 0.4 }) +
    label(at + 9, top + 6.2, text, { size: s.textPt, fill: s.ink });
  const wide = (text: string): number => 9 + textWidth(text, s.textPt) + 6;
  const left = right - wide("insulating") - wide("metallic");
  return item(left, s.insulating, "insulating") + item(left + wide("insulating"), s.metallic, "metallic");
}
