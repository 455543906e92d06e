import { plainText } from "../model/text.js";

export type Attributes = Readonly<Record<string, string | number | null | undefined>>;

/** A coordinate in points, to a hundredth. */
export function pt(v: number): string {
  const s = v.toFixed(2);
  return s.includes(".") ? s.replace(/\.?0+$/, "").replace(/^-0$/, "0") : s;
}

/** Any text made fit for XML: what could end an element or an attribute is escaped, control characters and marks that turn the writing
 *  direction become visible escapes. */
export function escapeXml(s: string): string {
  return plainText(s)
    .replace(/&/g, "&amp;")
    .replace(/</g, "&lt;")
    .replace(/>/g, "&gt;")
    .replace(/"/g, "&quot;")
    .replace(/'/g, "&#39;");
}

/** An element; numbers in attributes are written as they are, except coordinates, which callers give as strings from `pt`. Attributes
 *  without a value are left out. */
export function element(name: string, attributes: Attributes, ...children: readonly string[]): string {
  const parts: string[] = [];
  for (const [k, v] of Object.entries(attributes)) {
    if (v === null || v === undefined) continue;
    parts.push(` ${k}="${typeof v === "number" ? String(v) : escapeXml(v)}"`);
  }
  const open = `<${name}${parts.join("")}`;
  return children.length === 0 ? `${open}/>` : `${open}>${children.join("")}</${name}>`;
}

export const group = (attributes: Attributes, ...children: readonly string[]): string =>
  element("g", attributes, ...children);

export interface TextLook {
  readonly size: number;
  readonly fill: string;
  readonly anchor?: "start" | "middle" | "end";
  readonly weight?: "bold";
  /** Turned by −90° about its place. */
  readonly upright?: boolean;
}

/** A line of text with its baseline at (x, y). */
export function label(x: number, y: number, content: string, look: TextLook, more: Attributes = {}): string {
  return element(
    "text",
    {
      x: pt(x),
      y: pt(y),
      "font-size": look.size,
      fill: look.fill,
      "text-anchor": look.anchor === "start" ? undefined : look.anchor,
      "font-weight": look.weight,
      transform: look.upright === true ? `rotate(-90 ${pt(x)} ${pt(y)})` : undefined,
      ...more,
    },
    escapeXml(content),
  );
}

/** Width of a text in points, on the safe side: of the fonts named in the style the widest has digits of 0.64 em. */
export function textWidth(content: string, size: number): number {
  let em = 0;
  for (const ch of content)
    em += /[ijlI.,:;|' ]/.test(ch) ? 0.34 : /[mwMW]/.test(ch) ? 0.95 : /[A-Z%]/.test(ch) ? 0.72 : 0.62;
  return em * size;
}

/** A text cut short with an ellipsis where it would not fit. */
export function fitText(content: string, size: number, room: number): string {
  if (textWidth(content, size) <= room) return content;
  const letters = Array.from(content);
  while (letters.length > 1 && textWidth(`${letters.join("")}…`, size) > room) letters.pop();
  return `${letters.join("")}…`;
}

/** A line through points; a point that is not finite interrupts it. */
export function polyline(xs: ArrayLike<number>, ys: ArrayLike<number>, attributes: Attributes): string {
  let d = "";
  let open = false;
  for (let k = 0; k < xs.length; k++) {
    if (!Number.isFinite(xs[k]) || !Number.isFinite(ys[k])) {
      open = false;
      continue;
    }
    d += `${open ? "L" : "M"}${pt(xs[k])} ${pt(ys[k])}`;
    open = true;
  }
  return d === "" ? "" : element("path", { d, fill: "none", ...attributes });
}

export const line = (x1: number, y1: number, x2: number, y2: number, attributes: Attributes): string =>
  element("path", { d: `M${pt(x1)} ${pt(y1)}L${pt(x2)} ${pt(y2)}`, fill: "none", ...attributes });
