import { countOf } from "../model/text.js";
import type { Figure, FigureOptions, Place } from "./figure.js";
import { legend, type LegendItem } from "./legend.js";
import { barPath, lyingBarPath, marker, stroke, type Shape } from "./marks.js";
import { axes, bottomRoom, leftRoom, type Panel } from "./panel.js";
import { must, num, word, type Cell, type Row } from "./rows.js";
import { extent, linear, niceTicks, numberText, tickLabels } from "./scale.js";
import { element, group, line, polyline } from "./svg.js";

export interface LoopInput {
  /** Rows of the tables `temperature` and `loops`, of one or several cooldowns. */
  readonly frames: readonly Row[];
  readonly loops: readonly Row[];
}

/** Shapes of further cooldowns; the first has triangles that point the way the temperature goes. */
const SHAPES: readonly Shape[] = ["circle", "square", "diamond"];

/** Metallic fraction against temperature, both branches of every cycle, with 95 % intervals and half temperatures. */
export function loopFigure(input: LoopInput, o: FigureOptions): Figure {
  const s = o.style;
  const names = [...new Set(input.frames.map((r) => word(r, "cooldown")))];
  const known = input.frames.filter((r) => num(r, "metallic_fraction") !== null);
  const halves = input.loops.flatMap((r) => HALF_COLUMNS.map((c) => num(r, c)));
  const [t0, t1] = extent([...known.map((r) => must(r, "temperature_K")), ...halves], 0.04);

  const several = names.length > 1;
  const shapeOf = (cooldown: number, branch: string): Shape =>
    cooldown === 0 ? (branch === "cooling" ? "down" : "up") : SHAPES[(cooldown - 1) % SHAPES.length];
  const colourOf = (cooldown: number, branch: string): string =>
    several ? s.series[cooldown % s.series.length] : s.series[branch === "cooling" ? 0 : 1];

  const yTicks = [0, 0.25, 0.5, 0.75, 1];
  const yLabels = tickLabels(yTicks);
  const left = leftRoom(yLabels, "Metallic fraction", s) + 2;
  const width = o.widthPt - left - 4;
  const key = legend(legendItems(names, input.loops, several, o, colourOf, shapeOf), left, 2, width, s);
  const panel: Panel = {
    left,
    top: key.height + 6,
    width,
    height: width * 0.68,
    x: linear(t0, t1, left, left + width),
    y: linear(-0.04, 1.04, key.height + 6 + width * 0.68, key.height + 6),
  };

  const under: string[] = [];
  const over: string[] = [];
  const rows: Cell[][] = [];
  const places: Place[] = [];
  names.forEach((name, c) => {
    const own = known.filter((r) => word(r, "cooldown") === name);
    for (const cycle of new Set(own.map((r) => must(r, "cycle")))) {
      for (const branch of ["cooling", "warming"]) {
        const series = own
          .filter((r) => must(r, "cycle") === cycle && word(r, "branch") === branch)
          .sort((a, b) => must(a, "temperature_K") - must(b, "temperature_K"));
        const colour = colourOf(c, branch);
        const xs = series.map((r) => panel.x(must(r, "temperature_K")));
        const ys = series.map((r) => panel.y(must(r, "metallic_fraction")));
        const dash = branch === "warming" ? "3 1.6" : undefined;
        under.push(polyline(xs, ys, { stroke: colour, "stroke-width": 0.8, "stroke-dasharray": dash }));
        series.forEach((r, k) => {
          const low = must(r, "metallic_fraction_low");
          const high = must(r, "metallic_fraction_high");
          under.push(element("path", { d: barPath(xs[k], panel.y(low), panel.y(high)), ...stroke(colour, 0.7) }));
          const fill = branch === "cooling" ? colour : s.background;
          places.push({ x: xs[k], y: ys[k], keys: { cooldown: c, frame: must(r, "frame") } });
          over.push(
            marker(
              xs[k],
              ys[k],
              { shape: shapeOf(c, branch), size: 4.6, fill, stroke: colour, strokeWidth: 0.8 },
              {
                "data-cooldown": name,
                "data-branch": branch,
                "data-cycle": cycle,
                "data-frame": num(r, "frame"),
                "data-temperature-k": num(r, "temperature_K"),
                "data-fraction": num(r, "metallic_fraction"),
                "data-low": low,
                "data-high": high,
              },
            ),
          );
          rows.push([
            "frame",
            name,
            branch,
            cycle,
            num(r, "frame"),
            num(r, "temperature_K"),
            num(r, "metallic_fraction"),
            low,
            high,
          ]);
        });
      }
      const loop = input.loops.find((r) => word(r, "cooldown") === name && must(r, "cycle") === cycle);
      for (const branch of ["cooling", "warming"]) {
        const half = loop === undefined ? null : num(loop, `${branch}_half_K`);
        if (loop === undefined || half === null) continue;
        const low = num(loop, `${branch}_half_low_K`) ?? half;
        const high = num(loop, `${branch}_half_high_K`) ?? half;
        const colour = colourOf(c, branch);
        const y = panel.y(0.5);
        over.push(
          element("path", { d: lyingBarPath(y, panel.x(low), panel.x(high), 2), ...stroke(colour, 1.1) }),
          marker(
            panel.x(half),
            y,
            { shape: "diamond", size: 5, fill: s.background, stroke: colour, strokeWidth: 1.1 },
            {
              "data-cooldown": name,
              "data-cycle": cycle,
              "data-branch": branch,
              "data-half-k": half,
              "data-low-k": low,
              "data-high-k": high,
            },
          ),
        );
        rows.push(["half", name, branch, cycle, null, half, 0.5, low, high]);
      }
    }
  });

  const guide = line(panel.left, panel.y(0.5), panel.left + panel.width, panel.y(0.5), {
    stroke: s.faint,
    "stroke-width": 0.4,
    "stroke-dasharray": "1 2",
  });
  const xTicks = niceTicks(t0, t1, Math.max(3, width / 38));
  const leftOut = input.frames.length - known.length;
  return {
    widthPt: o.widthPt,
    heightPt: panel.top + panel.height + bottomRoom("Temperature (K)", s) + 3,
    style: s,
    title: `Metallic fraction against temperature: ${names.join(", ")}`,
    notes: [
      "Metallic fraction of the field of view; bars: 95 % intervals.",
      "Filled, solid line: cooling; open, dashed line: warming.",
      "Diamonds: temperatures of fraction one half with 95 % intervals.",
      ...(leftOut > 0 ? [`Not shown for want of a fraction: ${countOf(leftOut, "frame")}.`] : []),
    ],
    body: [
      key.svg,
      guide,
      axes(
        panel,
        { title: "Temperature (K)", ticks: xTicks },
        { title: "Metallic fraction", ticks: yTicks, labels: yLabels },
        s,
      ),
      group({ class: "branches" }, ...under),
      group({ class: "points" }, ...over),
    ].join(""),
    table: {
      columns: ["what", "cooldown", "branch", "cycle", "frame", "temperature_K", "metallic_fraction", "low", "high"],
      rows,
    },
    places,
  };
}

const HALF_COLUMNS = [
  "cooling_half_low_K",
  "cooling_half_high_K",
  "warming_half_low_K",
  "warming_half_high_K",
  "cooling_half_K",
  "warming_half_K",
];

function legendItems(
  names: readonly string[],
  loops: readonly Row[],
  several: boolean,
  o: FigureOptions,
  colourOf: (c: number, branch: string) => string,
  shapeOf: (c: number, branch: string) => Shape,
): LegendItem[] {
  const s = o.style;
  const sign =
    (c: number, branch: string) =>
    (x: number, y: number): string => {
      const colour = colourOf(c, branch);
      const dash = branch === "warming" ? "3 1.6" : undefined;
      const fill = branch === "cooling" ? colour : s.background;
      return (
        line(x - 8, y, x + 8, y, { stroke: colour, "stroke-width": 0.8, "stroke-dasharray": dash }) +
        marker(x, y, { shape: shapeOf(c, branch), size: 4.6, fill, stroke: colour, strokeWidth: 0.8 })
      );
    };
  const items: LegendItem[] = [];
  names.forEach((name, c) => {
    const widths = loops.filter((r) => word(r, "cooldown") === name).map(widthText);
    const found = widths.filter((w) => w !== "").join("; ");
    if (several) {
      // Both signs are one: where a long name takes the whole line neither is left behind.
      const both = (x: number, y: number): string => sign(c, "cooling")(x - 12.5, y) + sign(c, "warming")(x + 12.5, y);
      items.push({ text: found === "" ? name : `${name}: width ${found}`, sign: both, wide: 41, breaks: true });
      if (c === names.length - 1)
        items.push({ text: "filled: cooling, open: warming", sign: () => "", wide: 0, breaks: true });
    } else {
      items.push({ text: "cooling", sign: sign(c, "cooling"), wide: 16 });
      items.push({ text: "warming", sign: sign(c, "warming"), wide: 16 });
      if (found !== "") items.push({ text: `width ${found}`, sign: () => "", wide: 0 });
    }
  });
  return items;
}

function widthText(r: Row): string {
  const [v, low, high] = [num(r, "width_K"), num(r, "width_low_K"), num(r, "width_high_K")];
  if (v === null) return "";
  const digits = 1;
  const range = low === null || high === null ? "" : ` (${numberText(low, digits)} to ${numberText(high, digits)})`;
  return `${numberText(v, digits)} K${range}`;
}
