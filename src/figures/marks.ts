import { element, pt, type Attributes } from "./svg.js";

export type Shape = "down" | "up" | "circle" | "square" | "diamond" | "cross";

/** Path of a marker of about `size` across, centred on (x, y). */
export function shapePath(shape: Shape, x: number, y: number, size: number): string {
  const r = size / 2;
  const paths: Readonly<Record<Shape, string>> = {
    down: `M${pt(x - r * 1.05)} ${pt(y - r * 0.75)}h${pt(2.1 * r)}L${pt(x)} ${pt(y + r * 1.1)}Z`,
    up: `M${pt(x - r * 1.05)} ${pt(y + r * 0.75)}h${pt(2.1 * r)}L${pt(x)} ${pt(y - r * 1.1)}Z`,
    circle: `M${pt(x - r)} ${pt(y)}a${pt(r)} ${pt(r)} 0 1 0 ${pt(2 * r)} 0a${pt(r)} ${pt(r)} 0 1 0 ${pt(-2 * r)} 0Z`,
    square: `M${pt(x - 0.9 * r)} ${pt(y - 0.9 * r)}h${pt(1.8 * r)}v${pt(1.8 * r)}h${pt(-1.8 * r)}Z`,
    diamond: `M${pt(x)} ${pt(y - 1.2 * r)}L${pt(x + 1.2 * r)} ${pt(y)}L${pt(x)} ${pt(y + 1.2 * r)}L${pt(x - 1.2 * r)} ${pt(y)}Z`,
    cross: `M${pt(x - r)} ${pt(y - r)}l${pt(2 * r)} ${pt(2 * r)}M${pt(x - r)} ${pt(y + r)}l${pt(2 * r)} ${pt(-2 * r)}`,
  };
  return paths[shape];
}

export interface MarkerLook {
  readonly shape: Shape;
  readonly size: number;
  readonly fill: string;
  readonly stroke: string;
  readonly strokeWidth?: number;
}

/** A marker; `data` become its data attributes, by which its numbers can be read back. */
export function marker(x: number, y: number, look: MarkerLook, data: Attributes = {}): string {
  return element("path", {
    d: shapePath(look.shape, x, y, look.size),
    fill: look.fill,
    stroke: look.stroke,
    "stroke-width": look.strokeWidth ?? 0.6,
    "stroke-linejoin": "round",
    ...data,
  });
}

/** Upright bar from y1 to y2 with caps. */
export const barPath = (x: number, y1: number, y2: number, cap = 1.2): string =>
  `M${pt(x)} ${pt(y1)}V${pt(y2)}` +
  (cap > 0 ? `M${pt(x - cap)} ${pt(y1)}h${pt(2 * cap)}M${pt(x - cap)} ${pt(y2)}h${pt(2 * cap)}` : "");

/** Lying bar from x1 to x2 with caps. */
export const lyingBarPath = (y: number, x1: number, x2: number, cap = 1.2): string =>
  `M${pt(x1)} ${pt(y)}H${pt(x2)}` +
  (cap > 0 ? `M${pt(x1)} ${pt(y - cap)}v${pt(2 * cap)}M${pt(x2)} ${pt(y - cap)}v${pt(2 * cap)}` : "");

/** A limit: a short roof at the value and an arrow pointing down from it. */
export const limitPath = (x: number, y: number, length = 4.2, half = 1.1): string =>
  `M${pt(x - half)} ${pt(y)}h${pt(2 * half)}M${pt(x)} ${pt(y)}v${pt(length)}` +
  `m${pt(-half)} ${pt(-half * 1.3)}l${pt(half)} ${pt(half * 1.3)}l${pt(half)} ${pt(-half * 1.3)}`;

export const stroke = (colour: string, width: number, more: Attributes = {}): Attributes => ({
  fill: "none",
  stroke: colour,
  "stroke-width": width,
  ...more,
});
