import { fastKink } from "../numerics/kink.js";
import type { Figure, FigureOptions } from "./figure.js";
import { legend, type LegendItem } from "./legend.js";
import { barPath, marker, stroke } from "./marks.js";
import { axes, bottomRoom, clipped, leftRoom, zeroLine, type Panel } from "./panel.js";
import { must, num, word, type Cell, type Row } from "./rows.js";
import { extent, linear, niceTicks, numberText, tickLabels } from "./scale.js";
import { element, fitText, group, label, line, polyline, pt } from "./svg.js";

export interface WallInput {
  /** The profile's row of the table `walls`. */
  readonly row: Row;
  readonly wNm: number;
  readonly sigmaNm: number;
  /** In turn: signed distance nm, share of the metallic signal, its sd. */
  readonly bins: ArrayLike<number>;
}

/** One stretch of one wall: pixels in bins of signed distance, the fit, what the tip makes of a sharp wall, residuals. */
export function wallFigure(input: WallInput, o: FigureOptions): Figure {
  const s = o.style;
  const { row } = input;
  const u = new Float64Array(4);
  const fitted = (d: number): number => {
    fastKink(d, input.wNm, input.sigmaNm, u);
    return u[0];
  };
  const hasTip = num(row, "tip_resolution_nm") !== null;
  const count = Math.floor(input.bins.length / 3);
  const bins = Array.from({ length: count }, (_, k) => {
    const [d, share, sd] = [input.bins[3 * k], input.bins[3 * k + 1], input.bins[3 * k + 2]];
    return { d, share, sd, fit: fitted(d) };
  });

  const [x0, x1] = extent(
    bins.map((b) => b.d),
    0.03,
  );
  const [s0, s1] = extent(
    bins.flatMap((b) => [b.share - b.sd, b.share + b.sd, -0.05, 1.05]),
    0.02,
  );
  const residualTitle = "Residual / sd";
  const yTitle = "Share of metallic signal";
  const rMost = Math.max(3.2, 1.1 * Math.max(...bins.map((b) => Math.abs((b.share - b.fit) / b.sd) + 1)));
  const yTicks = niceTicks(s0, s1, 5);
  const yLabels = tickLabels(yTicks);
  const rTicks = niceTicks(-rMost, rMost, 3);
  const left = Math.max(leftRoom(yLabels, yTitle, s), leftRoom(tickLabels(rTicks), residualTitle, s)) + 2;
  const width = o.widthPt - left - 4;
  const x = linear(x0, x1, left, left + width);
  const head = headline(row);
  const key = legend(legendItems(hasTip, o), left, s.textPt * 1.4 + 2, width, s);
  const top = key.height + s.textPt * 1.4 + 6;
  const main: Panel = { left, top, width, height: width * 0.52, x, y: linear(s0, s1, top + width * 0.52, top) };
  const below = top + main.height + 5;
  const rest: Panel = {
    left,
    top: below,
    width,
    height: width * 0.2,
    x,
    y: linear(-rMost, rMost, below + width * 0.2, below),
  };

  const grid = Float64Array.from({ length: 200 }, (_, k) => x0 + ((x1 - x0) * k) / 199);
  const curve = (f: (d: number) => number, attributes: Record<string, string | number>): string =>
    polyline(
      grid.map((d) => x(d)),
      grid.map((d) => main.y(f(d))),
      attributes,
    );
  const step = (d: number): number => {
    fastKink(d, 0, input.sigmaNm, u);
    return u[0];
  };

  const widthNm = num(row, "width_nm");
  const drawn = [zeroLine(main, 0, s), zeroLine(main, 1, s)];
  if (widthNm !== null) {
    // 10 and 90 % of the intrinsic profile lie half a width to either side of its middle
    for (const side of [-1, 1]) {
      const at = x((side * widthNm) / 2);
      drawn.push(
        line(at, main.top, at, main.top + main.height, {
          stroke: s.faint,
          "stroke-width": 0.5,
          "stroke-dasharray": "1 1.6",
        }),
      );
    }
    const y = main.y(0.9);
    const half = (widthNm / 2) * (x(1) - x(0));
    drawn.push(
      element("path", {
        class: "width",
        d: `M${pt(x(0) - half)} ${pt(y)}H${pt(x(0) + half)}m-2 -1.3l2 1.3l-2 1.3M${pt(x(0) - half + 2)} ${pt(y - 1.3)}l-2 1.3l2 1.3`,
        ...stroke(s.ink, 0.7),
        "data-width-nm": widthNm,
        "data-width-sd-nm": num(row, "width_sd_nm"),
      }),
    );
  }
  if (hasTip)
    drawn.push(curve(step, { class: "tip", stroke: s.faint, "stroke-width": 0.9, "stroke-dasharray": "3 1.8" }));
  drawn.push(curve(fitted, { class: "fit", stroke: s.ink, "stroke-width": 1 }));
  const residuals = [zeroLine(rest, 0, s)];
  const colour = (d: number): string => (d < 0 ? s.insulating : s.metallic);
  const rows: Cell[][] = [];
  for (const b of bins) {
    const r = (b.share - b.fit) / b.sd;
    drawn.push(
      element("path", {
        d: barPath(x(b.d), main.y(b.share - b.sd), main.y(b.share + b.sd), 0.9),
        ...stroke(s.ink, 0.5),
      }),
    );
    drawn.push(
      marker(
        x(b.d),
        main.y(b.share),
        { shape: "circle", size: 3.4, fill: colour(b.d), stroke: s.ink, strokeWidth: 0.4 },
        {
          "data-distance-nm": b.d,
          "data-share": b.share,
          "data-sd": b.sd,
        },
      ),
    );
    residuals.push(element("path", { d: barPath(x(b.d), rest.y(r - 1), rest.y(r + 1), 0), ...stroke(s.ink, 0.5) }));
    residuals.push(
      marker(
        x(b.d),
        rest.y(r),
        { shape: "circle", size: 2.6, fill: colour(b.d), stroke: s.ink, strokeWidth: 0.4 },
        { "data-residual": r },
      ),
    );
    rows.push([b.d, b.share, b.sd, b.fit, hasTip ? step(b.d) : null, r]);
  }
  const look = { size: s.textPt, fill: s.ink };
  const bottom = rest.top + rest.height;
  return {
    widthPt: o.widthPt,
    heightPt: bottom + bottomRoom("x", s) + 3,
    style: s,
    title: `Wall ${word(row, "wall")}, profile ${word(row, "profile")} of frame ${word(row, "frame")}, ${word(row, "cooldown")}`,
    notes: [
      "Pixels of one stretch of wall in bins of signed distance, on the scale of the two fitted levels; bars: one standard deviation.",
      hasTip
        ? "Solid: fit. Dashed: a wall of width zero as the tip shows it. Dotted: 10 and 90 % of the intrinsic profile."
        : "Solid: fit of the apparent profile (no tip resolution is known).",
    ],
    body: [
      label(left, s.textPt + 2, fitText(head.place, s.textPt, width), look),
      key.svg,
      axes(main, { title: "", labelled: false }, { title: yTitle, ticks: yTicks, labels: yLabels }, s),
      clipped(main, "wall-main", ...drawn),
      label(left + width - 4, main.y(0.05), head.quality, { ...look, anchor: "end" }),
      label(left + width - 4, main.y(0.05) - 1.4 * s.textPt, head.width, { ...look, anchor: "end" }),
      axes(rest, { title: "Distance from the wall (nm)" }, { title: residualTitle, ticks: rTicks }, s),
      clipped(rest, "wall-rest", ...residuals),
      group(
        {},
        label(left + 4, main.y(0.62), "insulating", { ...look, weight: "bold" }),
        label(left + width - 4, main.y(0.62), "metallic", { ...look, weight: "bold", anchor: "end" }),
      ),
    ].join(""),
    table: { columns: ["distance_nm", "share", "share_sd", "fit", "tip_alone", "residual_sd"], rows },
  };
}

/** Where, how wide, how well. */
function headline(r: Row): { place: string; width: string; quality: string } {
  const t = must(r, "temperature_K");
  const place = `${word(r, "cooldown")}, ${word(r, "branch")}, ${Number(t.toFixed(2))} K, frame ${word(r, "frame")}, wall ${word(r, "wall")}, profile ${word(r, "profile")}`;
  const w = num(r, "width_nm");
  const upper = num(r, "width_upper95_nm");
  const apparent = num(r, "apparent_width_nm");
  let width = "no width";
  if (w !== null) width = `width ${numberText(w, 1)} ± ${numberText(num(r, "width_sd_nm") ?? 0, 1)} nm`;
  else if (upper !== null) width = `width < ${numberText(upper, 1)} nm (95 %)`;
  const seen = apparent === null ? "" : `apparent ${numberText(apparent, 1)} nm`;
  const chi2 = num(r, "reduced_chi2");
  const flag = word(r, "flag");
  const quality = [seen, chi2 === null ? "" : `χ²/ν ${numberText(chi2, 2)}`, flag].filter((v) => v !== "").join(", ");
  return { place, width, quality };
}

function legendItems(hasTip: boolean, o: FigureOptions): LegendItem[] {
  const s = o.style;
  const stick =
    (attributes: Record<string, string | number>) =>
    (x: number, y: number): string =>
      line(x - 7, y, x + 7, y, { stroke: s.ink, "stroke-width": 1, ...attributes });
  return [
    {
      text: "pixels, binned",
      sign: (x, y) => marker(x, y, { shape: "circle", size: 3.4, fill: s.metallic, stroke: s.ink, strokeWidth: 0.4 }),
    },
    { text: "fit", wide: 14, sign: stick({}) },
    ...(hasTip
      ? [
          {
            text: "tip alone",
            wide: 14,
            sign: stick({ stroke: s.faint, "stroke-width": 0.9, "stroke-dasharray": "3 1.8" }),
          },
        ]
      : []),
  ];
}
