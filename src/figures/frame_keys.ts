import { hexOf } from "./colour.js";
import type { FigureOptions } from "./figure.js";
import type { ColourScale, Shown } from "./paint.js";
import { niceTicks, roundBelow, tickLabels } from "./scale.js";
import { element, group, label, line, pt, textWidth } from "./svg.js";

/** The round length of a bar that is at most so long, and how it is written. */
export function scaleLength(mostNm: number): { nm: number; text: string } {
  const nm = roundBelow(mostNm);
  return { nm, text: nm >= 1000 ? `${Number((nm / 1000).toFixed(2))} µm` : `${nm} nm` };
}

/** A bar of a round length at the scale of the sheet. */
export function scaleBar(left: number, top: number, windowNm: number, perNm: number, o: FigureOptions): string {
  const s = o.style;
  const { nm, text } = scaleLength(0.8 * windowNm);
  const y = top + 3;
  return (
    line(left, y, left + nm * perNm, y, { stroke: s.ink, "stroke-width": 2, "data-length-nm": nm }) +
    label(left, y + s.textPt + 4, text, { size: s.textPt, fill: s.ink })
  );
}

/** The colours of an image with their values. */
export function colourBar(
  right: number,
  top: number,
  room: number,
  shown: Shown,
  unitName: string,
  scale: ColourScale,
  o: FigureOptions,
): string {
  const s = o.style;
  const wide = Math.min(100, 0.42 * room);
  const left = right - wide - 8;
  const steps = 64;
  const parts: string[] = [];
  for (let k = 0; k < steps; k++)
    parts.push(
      element("rect", {
        x: pt(left + (wide * k) / steps),
        y: pt(top),
        width: pt(wide / steps + 0.3),
        height: "6",
        fill: hexOf(scale.map((k + 0.5) / steps)),
      }),
    );
  parts.push(
    element("rect", {
      x: pt(left),
      y: pt(top),
      width: pt(wide),
      height: "6",
      fill: "none",
      stroke: s.ink,
      "stroke-width": 0.4,
    }),
  );
  const ticks = scale.cyclic ? [-Math.PI, 0, Math.PI] : niceTicks(scale.low, scale.high, 3);
  const labels = scale.cyclic ? ["−π", "0", "π"] : tickLabels(ticks);
  ticks.forEach((t, k) => {
    const x = left + ((t - scale.low) / (scale.high - scale.low)) * wide;
    parts.push(line(x, top + 6, x, top + 8, { stroke: s.ink, "stroke-width": 0.4 }));
    parts.push(label(x, top + 8.5 + s.textPt, labels[k], { size: s.textPt, fill: s.ink, anchor: "middle" }));
  });
  const name = { amplitude: "Amplitude", phase: "Phase", topography: "Height", states: "" }[shown];
  const unit = unitName === "" ? "" : ` (${unitName})`;
  parts.push(label(left - 5, top + 6, `${name}${unit}`, { size: s.textPt, fill: s.ink, anchor: "end" }));
  return group({ class: "colour-bar", "data-low": scale.low, "data-high": scale.high }, ...parts);
}

/** Which colour is which state. */
export function stateKey(right: number, top: number, o: FigureOptions): string {
  const s = o.style;
  const item = (at: number, fill: string, text: string): string =>
    element("rect", { x: pt(at), y: pt(top), width: "7", height: "7", fill, stroke: s.ink, "stroke-width": 0.4 }) +
    label(at + 9, top + 6.2, text, { size: s.textPt, fill: s.ink });
  const wide = (text: string): number => 9 + textWidth(text, s.textPt) + 6;
  const left = right - wide("insulating") - wide("metallic");
  return item(left, s.insulating, "insulating") + item(left + wide("insulating"), s.metallic, "metallic");
}
