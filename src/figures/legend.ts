import type { Style } from "./style.js";
import { fitText, group, label, textWidth } from "./svg.js";

export interface LegendItem {
  readonly text: string;
  /** Draws the sign in a box of `SIGN` points across, its middle at (x, y). */
  readonly sign: (x: number, y: number) => string;
  /** Width of the sign, points. */
  readonly wide?: number;
  /** Begins a new line. */
  readonly breaks?: boolean;
}

const SIGN = 8;
const GAP = 7;

/** Items in lines as wide as the room; returns the drawing and the height it takes. */
export function legend(
  items: readonly LegendItem[],
  left: number,
  top: number,
  width: number,
  s: Style,
): { readonly svg: string; readonly height: number } {
  const lineHeight = s.textPt * 1.4;
  let x = left;
  let y = top + s.textPt;
  const parts: string[] = [];
  items.forEach((item, k) => {
    const sign = item.wide ?? SIGN;
    const text = fitText(item.text, s.textPt, Math.max(10, width - sign - 2));
    const wide = sign + 2 + textWidth(text, s.textPt);
    if (k > 0 && (item.breaks === true || x + wide > left + width)) {
      x = left;
      y += lineHeight;
    }
    parts.push(item.sign(x + sign / 2, y - 0.34 * s.textPt));
    parts.push(label(x + sign + (sign > 0 ? 2 : 0), y, text, { size: s.textPt, fill: s.ink }));
    x += wide + GAP;
  });
  const height = items.length === 0 ? 0 : y - top + 0.45 * s.textPt;
  return { svg: group({ class: "legend" }, ...parts), height };
}
