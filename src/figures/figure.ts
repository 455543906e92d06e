import type { FigureTable } from "./rows.js";
import type { Style } from "./style.js";
import { element, escapeXml, pt } from "./svg.js";

/** Where a thing of the tables is drawn, points, by which a page finds what is pointed at. */
export interface Place {
  readonly x: number;
  readonly y: number;
  /** What identifies it: `frame`, `wall` and `profile`, or `domain`; `cooldown` counts the cooldowns of the drawing. */
  readonly keys: Readonly<Record<string, number>>;
}

/** A finished drawing. */
export interface Figure {
  readonly widthPt: number;
  readonly heightPt: number;
  readonly style: Style;
  readonly title: string;
  /** What a caption has to say: what the bars are, what is left out. One sentence each. */
  readonly notes: readonly string[];
  readonly body: string;
  readonly table: FigureTable;
  readonly places?: readonly Place[];
}

export interface FigureOptions {
  readonly widthPt: number;
  readonly style: Style;
}

export const ptFromMm = (mm: number): number => (mm * 72) / 25.4;
export const mmFromPt = (points: number): number => (points * 25.4) / 72;

/** The drawing as an SVG document. `unit`: `mm` for papers; `px` counts points as pixels, for drawing it into pixels. */
export function svgDocument(f: Figure, unit: "mm" | "px" = "mm"): string {
  const size = (v: number): string => (unit === "mm" ? `${Number(mmFromPt(v).toFixed(3))}mm` : pt(v));
  const root = element(
    "svg",
    {
      xmlns: "http://www.w3.org/2000/svg",
      "xmlns:xlink": "http://www.w3.org/1999/xlink",
      width: size(f.widthPt),
      height: size(f.heightPt),
      viewBox: `0 0 ${pt(f.widthPt)} ${pt(f.heightPt)}`,
      "font-family": f.style.font,
      role: "img",
    },
    element("title", {}, escapeXml(f.title)),
    element("desc", {}, escapeXml(f.notes.join(" "))),
    element("rect", { width: pt(f.widthPt), height: pt(f.heightPt), fill: f.style.background }),
    f.body,
  );
  return `<?xml version="1.0" encoding="UTF-8"?>\n${root}\n`;
}
