import { plainText } from "../model/text.js";
import type { ExclusionData } from "./data.js";

/** A reason has at most this many characters. */
export const LONGEST_REASON = 400;

/** A reason on one line, as `exclude:` takes it; "" where nothing is left of it. */
export function reasonLine(text: string): string {
  const line = plainText(text.replace(/\s+/gu, " ").trim());
  return Array.from(line).slice(0, LONGEST_REASON).join("").trim();
}

/** A region of a frame, corners in any order, to a tenth of a nm and cut at the frame's outermost pixel centres; null where it lies outside. */
export function regionWithin(
  corners: readonly [number, number, number, number],
  size: { readonly xNm: number; readonly yNm: number },
): readonly [number, number, number, number] | null {
  const [a, b, c, d] = corners;
  const [x0, y0, x1, y1] = [Math.min(a, c), Math.min(b, d), Math.max(a, c), Math.max(b, d)];
  if (x1 < 0 || y1 < 0 || x0 > size.xNm || y0 > size.yNm) return null;
  const tenth = (v: number): number => Math.round(10 * v) / 10;
  return [tenth(Math.max(0, x0)), tenth(Math.max(0, y0)), tenth(Math.min(size.xNm, x1)), tenth(Math.min(size.yNm, y1))];
}

/** The whole `exclude:` entry of a cooldown.yaml: what it held when it was ingested, then what is new. Nothing where both are empty.
 *  A reason is written as a JSON string, which YAML reads as the same text whatever stands in it. */
export function excludeLines(stored: readonly ExclusionData[], added: readonly ExclusionData[]): string {
  if (stored.length + added.length === 0) return "";
  return `exclude:\n${[...stored, ...added].map((e) => `  - ${entry(e)}\n`).join("")}`;
}

function entry(e: ExclusionData): string {
  const region = e.regionNm === null ? "" : ` region_nm: [${e.regionNm.join(", ")}],`;
  return `{ frame: ${e.frame},${region} reason: ${JSON.stringify(e.reason)} }`;
}
