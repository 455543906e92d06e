import { niceTicks, tickLabels, type Scale } from "./scale.js";
import type { Style } from "./style.js";
import { element, group, label, line, pt, textWidth } from "./svg.js";

/** A rectangle of the drawing with its two scales, points. */
export interface Panel {
  readonly left: number;
  readonly top: number;
  readonly width: number;
  readonly height: number;
  readonly x: Scale;
  readonly y: Scale;
}

export interface Axis {
  /** Quantity with its unit in brackets; "" for none. */
  readonly title: string;
  readonly ticks?: readonly number[];
  readonly labels?: readonly string[];
  /** False: ticks without labels, as where another panel below has them. */
  readonly labelled?: boolean;
  /** Short ticks without labels. */
  readonly minor?: readonly number[];
}

const TICK = 2.6;

export const ticksOf = (scale: Scale, wanted: number): number[] =>
  niceTicks(Math.min(scale.low, scale.high), Math.max(scale.low, scale.high), wanted);

/** Room that the labels and the title of a y axis need to the left of a panel. */
export function leftRoom(labels: readonly string[], title: string, s: Style): number {
  const widest = Math.max(0, ...labels.map((t) => textWidth(t, s.textPt)));
  return widest + 3 + (title === "" ? 1 : s.titlePt * 1.35);
}

/** Room below a panel for ticks and title. */
export const bottomRoom = (title: string, s: Style, labelled = true): number =>
  (labelled ? s.textPt * 1.25 + 2.5 : 2) + (title === "" ? 0 : s.titlePt * 1.3);

/** Frame, ticks pointing inwards on all four sides, labels and titles. */
export function axes(p: Panel, xAxis: Axis, yAxis: Axis, s: Style): string {
  const right = p.left + p.width;
  const bottom = p.top + p.height;
  const xTicks = xAxis.ticks ?? ticksOf(p.x, Math.max(2, p.width / 38));
  const yTicks = yAxis.ticks ?? ticksOf(p.y, Math.max(2, p.height / 22));
  const xLabels = xAxis.labels ?? tickLabels(xTicks);
  const yLabels = yAxis.labels ?? tickLabels(yTicks);
  let d = "";
  for (const t of xTicks) {
    const x = pt(p.x(t));
    d += `M${x} ${pt(bottom)}v${-TICK}M${x} ${pt(p.top)}v${TICK}`;
  }
  for (const t of yTicks) {
    const y = pt(p.y(t));
    d += `M${pt(p.left)} ${y}h${TICK}M${pt(right)} ${y}h${-TICK}`;
  }
  for (const t of yAxis.minor ?? []) {
    const y = pt(p.y(t));
    d += `M${pt(p.left)} ${y}h${TICK / 2}M${pt(right)} ${y}h${-TICK / 2}`;
  }
  const parts = [
    element("rect", {
      x: pt(p.left),
      y: pt(p.top),
      width: pt(p.width),
      height: pt(p.height),
      fill: "none",
      stroke: s.ink,
      "stroke-width": s.linePt,
    }),
    element("path", { d, fill: "none", stroke: s.ink, "stroke-width": s.linePt }),
  ];
  const text = { size: s.textPt, fill: s.ink };
  if (xAxis.labelled !== false)
    xTicks.forEach((t, k) =>
      parts.push(label(p.x(t), bottom + s.textPt + 2, xLabels[k], { ...text, anchor: "middle" })),
    );
  if (yAxis.labelled !== false)
    yTicks.forEach((t, k) =>
      parts.push(label(p.left - 3, p.y(t) + 0.35 * s.textPt, yLabels[k], { ...text, anchor: "end" })),
    );
  const title = { size: s.titlePt, fill: s.ink, anchor: "middle" as const };
  if (xAxis.title !== "") {
    const y = bottom + bottomRoom(xAxis.title, s, xAxis.labelled !== false) - 0.3 * s.titlePt;
    parts.push(label(p.left + p.width / 2, y, xAxis.title, title));
  }
  if (yAxis.title !== "") {
    const x = p.left - leftRoom(yAxis.labelled === false ? [] : yLabels, yAxis.title, s) + s.titlePt;
    parts.push(label(x, p.top + p.height / 2, yAxis.title, { ...title, upright: true }));
  }
  return group({ class: "axes" }, ...parts);
}

/** Everything in `children` is cut at the panel's edges. `id` must be unique in the drawing. */
export function clipped(p: Panel, id: string, ...children: readonly string[]): string {
  const rect = element("rect", { x: pt(p.left), y: pt(p.top), width: pt(p.width), height: pt(p.height) });
  return element("clipPath", { id }, rect) + group({ "clip-path": `url(#${id})` }, ...children.filter((c) => c !== ""));
}

export const zeroLine = (p: Panel, v: number, s: Style): string =>
  line(p.left, p.y(v), p.left + p.width, p.y(v), { stroke: s.faint, "stroke-width": 0.5 });
