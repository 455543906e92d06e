import { countOf } from "../model/text.js";
import type { Figure, FigureOptions } from "./figure.js";
import { colourBar, scaleBar, stateKey } from "./frame_keys.js";
import { marker } from "./marks.js";
import type { ColourScale, Shown } from "./paint.js";
import { must, num, word, type Cell, type Row } from "./rows.js";
import { numberText } from "./scale.js";
import { element, group, label, pt, textWidth } from "./svg.js";

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
  readonly walls: readonly {
    readonly points: ArrayLike<number>;
    readonly closed: boolean;
    readonly lengthNm: number;
  }[];
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
  const columns = columnsFor(seriesLengths(frames), Math.max(1, Math.floor((width + GAP) / (LEAST_CELL + GAP))));
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
    const branch = branchOf(f.row);
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
  parts.push(
    input.scale === null
      ? stateKey(o.widthPt - margin, bottom, o)
      : colourBar(o.widthPt - margin, bottom, width, input.shown, input.unit, input.scale, o),
  );
  const notPlaced = frames.filter((f) => num(f.row, "drift_x_nm") === null).length;
  return {
    widthPt: o.widthPt,
    heightPt: bottom + 2.6 * s.textPt + 4,
    style: s,
    title: `${countOf(frames.length, "frame")} of ${word(first?.row ?? {}, "cooldown")} along the loop`,
    notes: [
      "Frames in the coordinates of the cooldown, so that the sample stands still; lines: walls between the two states; number at the right: metallic fraction.",
      ...(frames.length < input.total ? [`${frames.length} of ${input.total} frames are shown.`] : []),
      ...(notPlaced > 0 ? [`Not placed, shown where they were scanned: ${countOf(notPlaced, "frame")}.`] : []),
    ],
    body: parts.join(""),
    table: {
      columns: [
        "frame",
        "branch",
        "cycle",
        "temperature_K",
        "drift_x_nm",
        "drift_y_nm",
        "metallic_fraction",
        "walls",
        "walls_length_nm",
      ],
      rows,
    },
  };
}

const branchOf = (r: Row): string => `${word(r, "cycle")} ${word(r, "branch")}`;

/** Numbers of frames that follow each other on one branch. */
function seriesLengths(frames: readonly FramePicture[]): number[] {
  const out: number[] = [];
  frames.forEach((f, k) => {
    if (k > 0 && branchOf(f.row) === branchOf(frames[k - 1].row)) out[out.length - 1]++;
    else out.push(1);
  });
  return out;
}

/** The number of columns, from half of the most to the most, that leaves the fewest cells empty. */
function columnsFor(lengths: readonly number[], most: number): number {
  const widest = Math.min(most, Math.max(1, ...lengths));
  let best = widest;
  let least = Infinity;
  for (let c = widest; c >= widest / 2; c--) {
    const empty = lengths.reduce((a, n) => a + ((c - (n % c)) % c), 0);
    if (empty < least) {
      least = empty;
      best = c;
    }
  }
  return best;
}

/** Median, so that one frame that lies far off does not push all others out of the window. */
function middle(values: readonly (number | null)[]): number {
  const known = values.filter((v) => v !== null).sort((a, b) => a - b);
  return known.length === 0 ? 0 : (known[(known.length - 1) >> 1] + known[known.length >> 1]) / 2;
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
    marker(left + 2.6, y - 0.36 * s.textPt, {
      shape: cooling ? "down" : "up",
      size: 4,
      fill: cooling ? colour : s.background,
      stroke: colour,
      strokeWidth: 0.8,
    }) +
    label(left + 6.4, y, temperature, look, {
      "data-frame": num(r, "frame"),
      "data-temperature-k": num(r, "temperature_K"),
      "data-fraction": fraction,
    }) +
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

function picture(
  f: FramePicture,
  k: number,
  left: number,
  top: number,
  p: Place,
  input: FramesInput,
  o: FigureOptions,
): string {
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
    "xlink:href": f.href,
  });
  const d = f.walls.map((w) => wallPath(w, x, y)).join("");
  const walls =
    d === ""
      ? ""
      : element("path", { d, fill: "none", stroke: s.wallUnder, "stroke-width": 1.2, "stroke-linejoin": "round" }) +
        element("path", {
          class: "walls",
          d,
          fill: "none",
          stroke: s.wall,
          "stroke-width": 0.5,
          "stroke-linejoin": "round",
        });
  return (
    element("clipPath", { id: `frame-${k}` }, element("rect", box)) +
    group(
      { "clip-path": `url(#frame-${k})` },
      element("rect", { ...box, fill: s.faint, "fill-opacity": 0.35 }),
      image,
      walls,
    ) +
    element("rect", { ...box, fill: "none", stroke: s.ink, "stroke-width": 0.4 })
  );
}

/** The points of a wall, thinned to what the drawing can show. */
function wallPath(
  w: { points: ArrayLike<number>; closed: boolean },
  x: (nm: number) => number,
  y: (nm: number) => number,
): string {
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
