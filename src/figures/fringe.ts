import type { Figure, FigureOptions } from "./figure.js";
import { legend, type LegendItem } from "./legend.js";
import { barPath, marker, stroke } from "./marks.js";
import { axes, bottomRoom, clipped, leftRoom, zeroLine, type Panel } from "./panel.js";
import { must, num, word, type Cell, type Row } from "./rows.js";
import { extent, linear, niceTicks, numberText, tickLabels } from "./scale.js";
import { element, fitText, label, line, polyline } from "./svg.js";

export interface FringeInput {
  /** The stretch's row of the table `fringes`. */
  readonly row: Row;
  readonly metallicRe: number;
  readonly metallicIm: number;
  /** In turn: signed distance nm; signal re, im; sd of its phase rad; null re, im; fit re, im; in units of the insulating level. */
  readonly bins: ArrayLike<number>;
}

export interface FringeBin {
  readonly distanceNm: number;
  readonly re: number;
  readonly im: number;
  readonly sdRad: number;
  readonly phaseRad: number;
  readonly nullRe: number;
  readonly nullIm: number;
  readonly nullRad: number;
  readonly fitRe: number;
  readonly fitIm: number;
  readonly fitRad: number;
}

/** The bins with their phases; null and fit follow the data over ±π. */
export function binsOf(flat: ArrayLike<number>): FringeBin[] {
  return Array.from({ length: Math.floor(flat.length / 8) }, (_, k) => {
    const [distanceNm, re, im, sdRad, nullRe, nullIm, fitRe, fitIm] = Array.from(
      { length: 8 },
      (__, j) => flat[8 * k + j],
    );
    const phaseRad = Math.atan2(im, re);
    const near = (y: number, x: number): number => phaseRad + Math.atan2(y * re - x * im, x * re + y * im);
    return {
      distanceNm,
      re,
      im,
      sdRad,
      phaseRad,
      nullRe,
      nullIm,
      nullRad: near(nullIm, nullRe),
      fitRe,
      fitIm,
      fitRad: near(fitIm, fitRe),
    };
  });
}

/** The optical phase beside one stretch of wall: what two states alone would give, the fit, and the departure from the null. */
export function fringeFigure(input: FringeInput, o: FigureOptions): Figure {
  const s = o.style;
  const { row } = input;
  const bins = binsOf(input.bins);
  const phaseTitle = "Optical phase (rad)";
  const restTitle = "Departure (rad)";
  const [x0, x1] = extent(
    bins.map((b) => b.distanceNm),
    0.03,
  );
  const [p0, p1] = extent(
    bins.flatMap((b) => [b.phaseRad - b.sdRad, b.phaseRad + b.sdRad, b.nullRad, b.fitRad]),
    0.06,
  );
  const contrast = num(row, "contrast_rad");
  const contrastSd = num(row, "contrast_sd_rad") ?? 0;
  const marked = contrast === null || num(row, "detected") !== 1 ? [] : [contrast - contrastSd, contrast + contrastSd];
  const [d0, d1] = extent(
    [
      ...marked,
      ...bins.flatMap((b) => [
        b.phaseRad - b.nullRad - b.sdRad,
        b.phaseRad - b.nullRad + b.sdRad,
        b.fitRad - b.nullRad,
      ]),
    ],
    0.06,
  );
  const yTicks = niceTicks(p0, p1, 5);
  const dTicks = niceTicks(d0, d1, 4);
  const left = Math.max(leftRoom(tickLabels(yTicks), phaseTitle, s), leftRoom(tickLabels(dTicks), restTitle, s)) + 2;
  const width = o.widthPt - left - 4;
  const x = linear(x0, x1, left, left + width);
  const detected = num(row, "detected") === 1;
  const heads = [placeText(row), ...numbersText(row)];
  const key = legend(legendItems(detected, o), left, s.textPt * 1.4 * heads.length + 2, width, s);
  const top = key.height + s.textPt * 1.4 * heads.length + 6;
  const h1 = width * 0.42;
  const h2 = width * 0.34;
  const main: Panel = { left, top, width, height: h1, x, y: linear(p0, p1, top + h1, top) };
  const below = top + h1 + 5;
  const rest: Panel = { left, top: below, width, height: h2, x, y: linear(d0, d1, below + h2, below) };

  const xs = bins.map((b) => x(b.distanceNm));
  const nullLook = { class: "null-curve", stroke: s.faint, "stroke-width": 0.9, "stroke-dasharray": "3 1.8" };
  const fitLook = {
    class: "fit",
    stroke: s.ink,
    "stroke-width": 1,
    ...(detected ? {} : { "stroke-dasharray": "1 1.6" }),
  };
  const colour = (d: number): string => (d < 0 ? s.insulating : s.metallic);
  const wallAt = (p: Panel): string =>
    line(x(0), p.top, x(0), p.top + p.height, { stroke: s.faint, "stroke-width": 0.5 });
  const upper = [wallAt(main)];
  const lower = [wallAt(rest), zeroLine(rest, 0, s)];
  const rows: Cell[][] = [];
  for (const b of bins) {
    const at = x(b.distanceNm);
    const off = b.phaseRad - b.nullRad;
    upper.push(
      element("path", {
        d: barPath(at, main.y(b.phaseRad - b.sdRad), main.y(b.phaseRad + b.sdRad), 0),
        ...stroke(s.ink, 0.45),
      }),
    );
    upper.push(
      marker(
        at,
        main.y(b.phaseRad),
        { shape: "circle", size: 2.8, fill: colour(b.distanceNm), stroke: s.ink, strokeWidth: 0.35 },
        {
          "data-distance-nm": b.distanceNm,
          "data-phase-rad": b.phaseRad,
          "data-sd-rad": b.sdRad,
          "data-null-rad": b.nullRad,
          "data-fit-rad": b.fitRad,
        },
      ),
    );
    lower.push(
      element("path", { d: barPath(at, rest.y(off - b.sdRad), rest.y(off + b.sdRad), 0), ...stroke(s.ink, 0.45) }),
    );
    lower.push(
      marker(at, rest.y(off), {
        shape: "circle",
        size: 2.8,
        fill: colour(b.distanceNm),
        stroke: s.ink,
        strokeWidth: 0.35,
      }),
    );
    rows.push([b.distanceNm, b.phaseRad, b.sdRad, b.nullRad, b.fitRad, off, b.fitRad - b.nullRad]);
  }
  upper.push(
    polyline(
      xs,
      bins.map((b) => main.y(b.nullRad)),
      nullLook,
    ),
  );
  upper.push(
    polyline(
      xs,
      bins.map((b) => main.y(b.fitRad)),
      fitLook,
    ),
  );
  lower.push(
    polyline(
      xs,
      bins.map((b) => rest.y(b.fitRad - b.nullRad)),
      fitLook,
    ),
  );
  lower.push(contrastMark(row, rest, o));

  const look = { size: s.textPt, fill: s.ink };
  return {
    widthPt: o.widthPt,
    heightPt: rest.top + h2 + bottomRoom("x", s) + 3,
    style: s,
    title: `Optical phase beside wall ${word(row, "wall")}, stretch ${word(row, "stretch")} of frame ${word(row, "frame")}, ${word(row, "cooldown")}`,
    notes: [
      "Phase of the mean signal in bins of signed distance, counted from the insulating state; bars: one standard deviation.",
      "Dashed: null, the two states blurred by the tip, with what their levels may be off beside this wall.",
      detected
        ? "Solid: fit with a fringe. Diamond: largest departure with its standard deviation."
        : "Dotted: the best fringe, which is not told from noise.",
    ],
    body: [
      ...heads.map((t, k) => label(left, s.textPt * (1 + 1.4 * k) + 2, fitText(t, s.textPt, width), look)),
      key.svg,
      axes(main, { title: "", labelled: false }, { title: phaseTitle, ticks: yTicks }, s),
      clipped(main, "fringe-main", ...upper),
      axes(rest, { title: "Distance from the wall (nm)" }, { title: restTitle, ticks: dTicks }, s),
      clipped(rest, "fringe-rest", ...lower),
    ].join(""),
    table: {
      columns: [
        "distance_nm",
        "phase_rad",
        "phase_sd_rad",
        "null_rad",
        "fit_rad",
        "departure_rad",
        "fit_departure_rad",
      ],
      rows,
    },
  };
}

/** The tabled contrast at its tabled place. */
function contrastMark(row: Row, rest: Panel, o: FigureOptions): string {
  const [contrast, sd, offset] = [num(row, "contrast_rad"), num(row, "contrast_sd_rad"), num(row, "offset_nm")];
  if (contrast === null || offset === null || num(row, "detected") !== 1) return "";
  const x = rest.x(offset);
  return (
    (sd === null
      ? ""
      : element("path", {
          d: barPath(x, rest.y(contrast - sd), rest.y(contrast + sd), 2),
          ...stroke(o.style.ink, 0.9),
        })) +
    marker(
      x,
      rest.y(contrast),
      { shape: "diamond", size: 5, fill: o.style.background, stroke: o.style.ink, strokeWidth: 0.9 },
      {
        "data-contrast-rad": contrast,
        "data-contrast-sd-rad": sd,
        "data-offset-nm": offset,
      },
    )
  );
}

export function placeText(r: Row): string {
  const t = Number(must(r, "temperature_K").toFixed(2));
  return `${word(r, "cooldown")}, ${word(r, "branch")}, ${t} K, frame ${word(r, "frame")}, wall ${word(r, "wall")}, stretch ${word(r, "stretch")}`;
}

/** Contrast, period and decay in words. */
function numbersText(r: Row): string[] {
  const pair = (name: string, value: number | null, sd: number | null, digits: number, unit: string): string[] =>
    value === null
      ? []
      : [`${name} ${numberText(value, digits)}${sd === null ? "" : ` ± ${numberText(sd, digits)}`} ${unit}`];
  if (num(r, "detected") !== 1) return [`no fringe: adjusted p ${numberText(num(r, "adjusted_p") ?? 1, 2)}`];
  return [
    pair("contrast", num(r, "contrast_rad"), num(r, "contrast_sd_rad"), 3, "rad").join(""),
    [
      ...pair("period", num(r, "period_nm"), num(r, "period_sd_nm"), 1, "nm"),
      ...pair("decay", num(r, "decay_nm"), num(r, "decay_sd_nm"), 1, "nm"),
    ].join(", "),
  ].filter((t) => t !== "");
}

function legendItems(detected: boolean, o: FigureOptions): LegendItem[] {
  const s = o.style;
  const dot =
    (fill: string) =>
    (x: number, y: number): string =>
      marker(x, y, { shape: "circle", size: 3, fill, stroke: s.ink, strokeWidth: 0.4 });
  return [
    { text: "insulating side", sign: dot(s.insulating) },
    { text: "metallic side", sign: dot(s.metallic) },
    {
      text: "null",
      wide: 14,
      sign: (x, y) => line(x - 7, y, x + 7, y, { stroke: s.faint, "stroke-width": 0.9, "stroke-dasharray": "3 1.8" }),
    },
    {
      text: detected ? "fit" : "best fringe, not told from noise",
      wide: 14,
      sign: (x, y) =>
        line(x - 7, y, x + 7, y, {
          stroke: s.ink,
          "stroke-width": 1,
          ...(detected ? {} : { "stroke-dasharray": "1 1.6" }),
        }),
    },
  ];
}
