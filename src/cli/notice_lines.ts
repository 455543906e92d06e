import { WARNINGS, type Notice } from "../model/cooldown.js";
import { plainText } from "../model/text.js";

/** How a notice is announced. */
const noticeWord = (code: string): string => (WARNINGS.has(code) ? "warning" : "note");

interface Group {
  readonly code: string;
  /** The message cut where it varies. */
  readonly fixed: readonly string[];
  /** What stood at each of these cuts, by notice. */
  readonly varied: (readonly string[])[];
  readonly frames: number[];
}

/** Everything skipped, excluded or doubtful in lines for people: each remark once, with all its frames; where it differs between
 *  these only in a name or a number (`Notice.varies`), with the range of those. */
export function noticeLines(notices: readonly Notice[]): string[] {
  const groups = new Map<string, Group>();
  for (const n of notices) {
    const { fixed, varied } = cut(n.message, n.varies ?? []);
    const key = JSON.stringify([n.code, fixed]);
    const group = groups.get(key) ?? { code: n.code, fixed, varied: [], frames: [] };
    groups.set(key, group);
    group.varied.push(varied);
    if (n.frame !== null) group.frames.push(n.frame);
  }
  return [...groups.values()].map(({ code, fixed, varied, frames }) => {
    const message = fixed.map((text, k) => (k === 0 ? text : span(varied.map((v) => v[k - 1])) + text)).join("");
    return plainText(`${noticeWord(code)}: ${framesText(frames)}${message}`);
  });
}

function cut(message: string, varies: readonly string[]): { fixed: string[]; varied: string[] } {
  const fixed: string[] = [];
  const varied: string[] = [];
  let from = 0;
  for (const part of varies) {
    const at = message.indexOf(part, from);
    if (at < 0) continue;
    fixed.push(message.slice(from, at));
    varied.push(part);
    from = at + part.length;
  }
  return { fixed: [...fixed, message.slice(from)], varied };
}

const NUMBER = /^(?:less than )?([-+]?\d[\d.]*(?:e[-+]?\d+)?)(?: %)?$/;

/** `2.0 % to 7.1 %` of numbers, `a.tif … f.tif` of names in their order. */
function span(texts: readonly string[]): string {
  const different = [...new Set(texts)];
  const [first, last] = [different[0], different[different.length - 1]];
  if (different.length === 1) return first;
  const values = different.map((t) => Number(NUMBER.exec(t)?.[1] ?? Number.NaN));
  if (values.some(Number.isNaN)) return different.length === 2 ? `${first}, ${last}` : `${first} … ${last}`;
  const at = (v: number): string => different[values.indexOf(v)];
  return `${at(Math.min(...values))} to ${at(Math.max(...values))}`;
}

/** `frame 3: `, `frames 3, 8 to 12: `; nothing where none is meant. */
function framesText(frames: readonly number[]): string {
  const sorted = [...new Set(frames)].sort((a, b) => a - b);
  const runs: [number, number][] = [];
  for (const f of sorted) {
    const run = runs[runs.length - 1];
    if (run !== undefined && run[1] === f - 1) run[1] = f;
    else runs.push([f, f]);
  }
  const parts = runs.map(([a, b]) => (a === b ? `${a}` : b === a + 1 ? `${a}, ${b}` : `${a} to ${b}`));
  return sorted.length === 0 ? "" : `${sorted.length === 1 ? "frame" : "frames"} ${parts.join(", ")}: `;
}
