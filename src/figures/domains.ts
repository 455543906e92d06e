import { countOf } from "../model/text.js";
import type { Figure, FigureOptions, Place } from "./figure.js";
import { legend, type LegendItem } from "./legend.js";
import { marker, type Shape } from "./marks.js";
import { axes, bottomRoom, clipped, leftRoom, type Panel } from "./panel.js";
import { must, num, word, type Cell, type Row } from "./rows.js";
import { extent, linear, logarithmic, logTicks, minorLogTicks, numberText } from "./scale.js";
import { label, line, polyline } from "./svg.js";
import { seriesMarks, unfold, unfoldedTicks } from "./unfold.js";

export interface DomainsInput {
  /** Rows of the tables `temperature`, `domains` and `domain-frames` of one cooldown. */
  readonly frames: readonly Row[];
  readonly domains: readonly Row[];
  readonly appearances: readonly Row[];
}

/** Domains drawn a kind: those that grow largest. */
const MOST_A_KIND = 40;

/** How a history begins and ends, as a marker; nothing is drawn for the first and the last frame. */
const BEGINS: Readonly<Record<string, Shape>> = { nucleated: "circle", split: "diamond", border: "square" };
const ENDS: Readonly<Record<string, Shape>> = { vanished: "circle", merged: "cross", border: "square" };

/** Histories of the domains: area along the run, a panel a state, with births, splits, mergers and ends. */
export function domainsFigure(input: DomainsInput, o: FigureOptions): Figure {
  const s = o.style;
  const yTitle = (kind: string): string => `${kind === "metallic" ? "Metallic" : "Insulating"} area (µm²)`;
  const run = unfold(input.frames);
  const areas = input.appearances.map((r) => must(r, "area_nm2") / 1e6);
  const [a0, a1] = areas.length === 0 ? [0.01, 1] : extent(areas);
  const low = a0 / 1.6;
  const high = a1 * 1.6;
  const yTicks = logTicks(low, high);
  const yLabels = yTicks.map((v) => numberText(v, Math.max(0, -Math.floor(Math.log10(v) + 1e-9))));
  const left = leftRoom(yLabels, "y", s) + 2;
  const width = o.widthPt - left - 4;
  const x = linear(-0.03 * run.length, 1.03 * run.length, left, left + width);
  const key = legend(legendItems(input, o), left, 2, width, s);
  const ticks = unfoldedTicks(run, width / 26);
  const height = width * 0.42;
  const parts: string[] = [key.svg];
  const rows: Cell[][] = [];
  const places: Place[] = [];
  let top = key.height + s.textPt + 8;
  let hidden = 0;
  for (const kind of ["metallic", "insulating"]) {
    const panel: Panel = { left, top, width, height, x, y: logarithmic(low, high, top + height, top) };
    const all = input.domains
      .filter((r) => word(r, "kind") === kind)
      .sort((a, b) => must(b, "largest_area_nm2") - must(a, "largest_area_nm2"));
    hidden += Math.max(0, all.length - MOST_A_KIND);
    const colour = kind === "metallic" ? s.metallic : s.insulating;
    const drawn = all.slice(0, MOST_A_KIND).flatMap((d) => {
      const own = input.appearances.filter((r) => must(r, "domain") === must(d, "domain"));
      for (const r of own) {
        places.push({
          x: panel.x(run.at.get(must(r, "frame")) ?? 0),
          y: panel.y(must(r, "area_nm2") / 1e6),
          keys: { domain: must(d, "domain"), frame: must(r, "frame") },
        });
        rows.push([
          must(d, "domain"),
          kind,
          word(d, "origin"),
          word(d, "fate"),
          num(r, "frame"),
          num(r, "temperature_K"),
          num(r, "area_nm2"),
          num(r, "touches_border"),
        ]);
      }
      return [history(d, own, panel, run.at, colour, o)];
    });
    const last = kind === "insulating";
    parts.push(
      seriesMarks(run, x, top, height, s, !last),
      axes(
        panel,
        { title: last ? "Temperature (K), in the order of the run" : "", ...ticks, labelled: last },
        { title: yTitle(kind), ticks: yTicks, labels: yLabels, minor: minorLogTicks(low, high) },
        s,
      ),
      clipped(panel, `domains-${kind}`, ...drawn),
    );
    if (all.length === 0)
      parts.push(
        label(left + width / 2, top + height / 2, `no ${kind} domain`, {
          size: s.textPt,
          fill: s.faint,
          anchor: "middle",
        }),
      );
    top += height + 5;
  }
  return {
    widthPt: o.widthPt,
    heightPt: top - 5 + bottomRoom("T", s) + 3,
    style: s,
    title: `Domain histories of ${word(input.frames[0] ?? {}, "cooldown")}`,
    notes: [
      "Area of each tracked domain along the run; dashed where it touches the edge of the measured area: a lower bound.",
      "Open signs: how a history begins (circle: nucleated, diamond: split off, square: over the border); filled: how it ends (circle: vanished, cross: merged, square: over the border).",
      ...(hidden > 0 ? [`Not drawn: ${countOf(hidden, "smaller domain")}.`] : []),
    ],
    body: parts.join(""),
    table: {
      columns: ["domain", "kind", "origin", "fate", "frame", "temperature_K", "area_nm2", "touches_border"],
      rows,
    },
    places,
  };
}

/** One line: solid between frames in which the domain lies free, dashed where it touches the border in one of them. */
function history(
  d: Row,
  own: readonly Row[],
  panel: Panel,
  at: ReadonlyMap<number, number>,
  colour: string,
  o: FigureOptions,
): string {
  const s = o.style;
  const points = own.map((r) => ({
    x: panel.x(at.get(must(r, "frame")) ?? 0),
    y: panel.y(must(r, "area_nm2") / 1e6),
    border: num(r, "touches_border") === 1,
  }));
  const data = { "data-domain": must(d, "domain"), "data-kind": word(d, "kind"), "data-frames": own.length };
  const parts: string[] = [];
  for (let k = 1; k < points.length; k++) {
    const [a, b] = [points[k - 1], points[k]];
    parts.push(
      line(a.x, a.y, b.x, b.y, {
        stroke: colour,
        "stroke-width": 0.8,
        "stroke-dasharray": a.border || b.border ? "2 1.4" : undefined,
      }),
    );
  }
  points.forEach((p, k) =>
    parts.push(
      marker(
        p.x,
        p.y,
        { shape: "circle", size: 1.5, fill: colour, stroke: "none" },
        {
          ...data,
          "data-frame": must(own[k], "frame"),
          "data-area-nm2": must(own[k], "area_nm2"),
        },
      ),
    ),
  );
  const first = points[0];
  const last = points[points.length - 1];
  const begin = BEGINS[word(d, "origin")];
  const end = ENDS[word(d, "fate")];
  if (begin !== undefined && first !== undefined)
    parts.push(
      marker(
        first.x,
        first.y,
        { shape: begin, size: 3.8, fill: s.background, stroke: s.ink, strokeWidth: 0.6 },
        { "data-domain": must(d, "domain"), "data-origin": word(d, "origin") },
      ),
    );
  if (end !== undefined && last !== undefined)
    parts.push(
      marker(
        last.x,
        last.y,
        { shape: end, size: 3.8, fill: colour, stroke: s.ink, strokeWidth: end === "cross" ? 0.9 : 0.6 },
        { "data-domain": must(d, "domain"), "data-fate": word(d, "fate") },
      ),
    );
  return parts.join("");
}

function legendItems(input: DomainsInput, o: FigureOptions): LegendItem[] {
  const s = o.style;
  const has = (column: string, value: string): boolean => input.domains.some((r) => word(r, column) === value);
  const open = (text: string, shape: Shape): LegendItem => ({
    text,
    sign: (x, y) => marker(x, y, { shape, size: 3.8, fill: s.background, stroke: s.ink, strokeWidth: 0.6 }),
  });
  const full = (text: string, shape: Shape): LegendItem => ({
    text,
    sign: (x, y) =>
      marker(x, y, { shape, size: 3.8, fill: s.faint, stroke: s.ink, strokeWidth: shape === "cross" ? 0.9 : 0.6 }),
  });
  const items: LegendItem[] = [];
  if (has("origin", "nucleated")) items.push(open("born", "circle"));
  if (has("origin", "split")) items.push(open("split off", "diamond"));
  if (has("fate", "vanished")) items.push(full("gone", "circle"));
  if (has("fate", "merged")) items.push(full("merged", "cross"));
  if (has("origin", "border") || has("fate", "border")) items.push(full("over the border", "square"));
  items.push({
    text: "cut by the border",
    wide: 12,
    sign: (x, y) =>
      polyline([x - 6, x + 6], [y, y], { stroke: s.ink, "stroke-width": 0.8, "stroke-dasharray": "2 1.4" }),
  });
  return items;
}
