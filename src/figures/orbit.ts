import type { Figure, FigureOptions } from "./figure.js";
import { binsOf, placeText, type FringeInput } from "./fringe.js";
import { legend, type LegendItem } from "./legend.js";
import { marker, stroke } from "./marks.js";
import { axes, bottomRoom, clipped, leftRoom, ticksOf, type Panel } from "./panel.js";
import { word, type Cell } from "./rows.js";
import { extent, linear, tickLabels } from "./scale.js";
import { element, fitText, label, line, polyline, pt } from "./svg.js";

/** The path that the signal takes in its complex plane from one side of a wall to the other, with the line of plain mixtures and the fit. */
export function orbitFigure(input: FringeInput, o: FigureOptions): Figure {
  const s = o.style;
  const bins = binsOf(input.bins);
  const xTitle = "Re z / z insulating";
  const yTitle = "Im z / z insulating";
  const { metallicRe, metallicIm } = input;
  const sdOf = (b: (typeof bins)[number]): number => b.sdRad * Math.hypot(b.re, b.im);
  const [x0, x1] = extent([...bins.flatMap((b) => [b.re - sdOf(b), b.re + sdOf(b), b.fitRe]), 1, metallicRe], 0.05);
  const [y0, y1] = extent([...bins.flatMap((b) => [b.im - sdOf(b), b.im + sdOf(b), b.fitIm]), 0, metallicIm], 0.05);

  const left = leftRoom(["−0.00"], yTitle, s) + 2;
  const width = o.widthPt - left - 4;
  const key = legend(legendItems(o), left, s.textPt * 1.4 + 2, width, s);
  const top = key.height + s.textPt * 1.4 + 6;
  // one unit is as long along both axes; the panel is never higher than wide
  const perUnit = Math.min(width / (x1 - x0), width / (y1 - y0));
  const height = Math.max(0.45 * width, (y1 - y0) * perUnit);
  const halfX = width / perUnit / 2;
  const halfY = height / perUnit / 2;
  const [cx, cy] = [(x0 + x1) / 2, (y0 + y1) / 2];
  const panel: Panel = {
    left,
    top,
    width,
    height,
    x: linear(cx - halfX, cx + halfX, left, left + width),
    y: linear(cy - halfY, cy + halfY, top + height, top),
  };
  const colour = (d: number): string => (d < 0 ? s.insulating : s.metallic);
  const rows: Cell[][] = [];
  const drawn: string[] = [
    line(panel.x(1), panel.y(0), panel.x(metallicRe), panel.y(metallicIm), {
      class: "chord",
      stroke: s.faint,
      "stroke-width": 0.9,
      "stroke-dasharray": "3 1.8",
    }),
    polyline(
      bins.map((b) => panel.x(b.re)),
      bins.map((b) => panel.y(b.im)),
      { stroke: s.faint, "stroke-width": 0.5 },
    ),
    polyline(
      bins.map((b) => panel.x(b.fitRe)),
      bins.map((b) => panel.y(b.fitIm)),
      { class: "fit", stroke: s.ink, "stroke-width": 1 },
    ),
  ];
  for (const b of bins) {
    const [x, y] = [panel.x(b.re), panel.y(b.im)];
    // the sd of the phase turns the signal: a bar across its direction
    const size = Math.hypot(b.re, b.im);
    const half = sdOf(b) * perUnit;
    const [dx, dy] = [(-b.im / size) * half, (-b.re / size) * half];
    drawn.push(
      element("path", { d: `M${pt(x - dx)} ${pt(y - dy)}L${pt(x + dx)} ${pt(y + dy)}`, ...stroke(s.ink, 0.4) }),
    );
    drawn.push(
      marker(
        x,
        y,
        { shape: "circle", size: 3, fill: colour(b.distanceNm), stroke: s.ink, strokeWidth: 0.35 },
        {
          "data-distance-nm": b.distanceNm,
          "data-re": b.re,
          "data-im": b.im,
          "data-phase-sd-rad": b.sdRad,
        },
      ),
    );
    rows.push([b.distanceNm, b.re, b.im, b.sdRad, b.nullRe, b.nullIm, b.fitRe, b.fitIm]);
  }
  for (const [re, im, fill] of [
    [1, 0, s.insulating],
    [metallicRe, metallicIm, s.metallic],
  ] as const)
    drawn.push(
      marker(
        panel.x(re),
        panel.y(im),
        { shape: "square", size: 6, fill, stroke: s.ink, strokeWidth: 0.8 },
        { "data-level-re": re, "data-level-im": im },
      ),
    );
  const yTicks = ticksOf(panel.y, Math.max(3, height / 26));
  return {
    widthPt: o.widthPt,
    heightPt: top + height + bottomRoom(xTitle, s) + 3,
    style: s,
    title: `Path of the signal across wall ${word(input.row, "wall")}, stretch ${word(input.row, "stretch")} of frame ${word(input.row, "frame")}, ${word(input.row, "cooldown")}`,
    notes: [
      "Mean complex signal in bins of signed distance, in units of the insulating level; bars: standard deviation of the phase.",
      "Squares: levels of the two states in this frame. Dashed: every mixture of the two, whatever the blur. Solid: fit with a fringe.",
    ],
    body: [
      label(left, s.textPt + 2, fitText(placeText(input.row), s.textPt, width), { size: s.textPt, fill: s.ink }),
      key.svg,
      axes(panel, { title: xTitle }, { title: yTitle, ticks: yTicks, labels: tickLabels(yTicks) }, s),
      clipped(panel, "orbit", ...drawn),
    ].join(""),
    table: { columns: ["distance_nm", "re", "im", "phase_sd_rad", "null_re", "null_im", "fit_re", "fit_im"], rows },
  };
}

function legendItems(o: FigureOptions): LegendItem[] {
  const s = o.style;
  const square =
    (fill: string) =>
    (x: number, y: number): string =>
      marker(x, y, { shape: "square", size: 5, fill, stroke: s.ink, strokeWidth: 0.7 });
  return [
    { text: "insulating", sign: square(s.insulating) },
    { text: "metallic", sign: square(s.metallic) },
    {
      text: "mixtures",
      wide: 14,
      sign: (x, y) => line(x - 7, y, x + 7, y, { stroke: s.faint, "stroke-width": 0.9, "stroke-dasharray": "3 1.8" }),
    },
    { text: "fit", wide: 14, sign: (x, y) => line(x - 7, y, x + 7, y, { stroke: s.ink, "stroke-width": 1 }) },
  ];
}
