import { must, word, type Row } from "./rows.js";
import { niceTicks, tickLabels, type Scale } from "./scale.js";
import type { Style } from "./style.js";
import { label, line } from "./svg.js";

/** The frames of a cooldown laid out in the order they were taken: along each series the temperature, one series after the other. */
export interface Unfolded {
  /** Place of a frame along the axis, K from the first frame. */
  readonly at: ReadonlyMap<number, number>;
  readonly length: number;
  readonly series: readonly {
    readonly branch: string;
    readonly from: number;
    readonly to: number;
    readonly fromK: number;
    readonly toK: number;
  }[];
}

/** @param frames rows of the table `temperature` of one cooldown, in order */
export function unfold(frames: readonly Row[]): Unfolded {
  const at = new Map<number, number>();
  const series: { branch: string; from: number; to: number; fromK: number; toK: number }[] = [];
  const span =
    frames.reduce((a, r) => Math.max(a, must(r, "temperature_K")), 0) -
    frames.reduce((a, r) => Math.min(a, must(r, "temperature_K")), Infinity);
  const gap = Math.max(0.06 * span, 0.5);
  let x = 0;
  let last: Row | null = null;
  for (const r of frames) {
    const t = must(r, "temperature_K");
    const begins =
      last === null || word(last, "branch") !== word(r, "branch") || must(last, "cycle") !== must(r, "cycle");
    if (last !== null) x += begins ? gap : Math.abs(t - must(last, "temperature_K"));
    const current = series[series.length - 1];
    if (begins) series.push({ branch: word(r, "branch"), from: x, to: x, fromK: t, toK: t });
    else Object.assign(current, { to: x, toK: t });
    at.set(must(r, "frame"), x);
    last = r;
  }
  return { at, length: Math.max(x, 1e-9), series };
}

/** Ticks at round temperatures inside each series, and a light line where one series ends and the next begins. */
export function unfoldedTicks(u: Unfolded, wanted: number): { ticks: number[]; labels: string[] } {
  const ticks: number[] = [];
  const temps: number[] = [];
  for (const part of u.series) {
    const share = (part.to - part.from) / u.length;
    const low = Math.min(part.fromK, part.toK);
    const high = Math.max(part.fromK, part.toK);
    if (!(high > low)) {
      ticks.push(part.from);
      temps.push(part.fromK);
      continue;
    }
    for (const t of niceTicks(low, high, Math.max(1, wanted * share))) {
      ticks.push(part.from + ((t - part.fromK) / (part.toK - part.fromK)) * (part.to - part.from));
      temps.push(t);
    }
  }
  return { ticks, labels: tickLabels(temps) };
}

/** Borders between the series, and what each of them is, at the top of a panel. */
export function seriesMarks(u: Unfolded, x: Scale, top: number, height: number, s: Style, named = true): string {
  let out = "";
  u.series.forEach((part, k) => {
    if (k > 0) {
      const at = x((part.from + u.series[k - 1].to) / 2);
      out += line(at, top, at, top + height, { stroke: s.faint, "stroke-width": 0.5, "stroke-dasharray": "1 2" });
    }
    if (!named) return;
    const middle = x((part.from + part.to) / 2);
    out += label(middle, top - 3, `${part.branch} \u2192`, { size: s.textPt, fill: s.ink, anchor: "middle" });
  });
  return out;
}
