import type { FrameDomains } from "../../model/domains.js";
import { INSULATING, METALLIC, NO_STATE } from "../../model/signal.js";
import type { Step } from "./match.js";
import { pixelShift, type Placed } from "./overlap.js";

/** Cuts and joins between two frames that nobody has seen happen, 1 by label: what was not measured (rows, scars, debris, the sample beyond
 *  the field) may be all that divides the pieces. */
export interface Unseen {
  /** Per label of the later frame: the piece may still hang together with the rest of what it is said to have split from. */
  readonly cut: Uint8Array;
  /** Per label of the earlier frame: the domain may already have been one with what it is said to have merged with. */
  readonly join: Uint8Array;
}

/** A cut is seen only where pixels of the other state divide the pieces. So the pieces are joined, as far as they may be, over the hidden pixels:
 *  those without a state, or outside the field, where the other of the two frames shows the domain that was cut (or is to be joined) or shows
 *  nothing either. Pieces that are then one have not been seen apart. */
export function unseenChanges(a: FrameDomains, b: FrameDomains, atA: Placed, atB: Placed, step: Step): Unseen {
  const { rows, cols } = pixelShift(atA, atB, b.map.pixel);
  return {
    cut: hangingTogether(b, a, rows, cols, step.splitFrom, step.predecessor, step.successor),
    join: hangingTogether(a, b, -rows, -cols, step.mergedInto, step.successor, step.predecessor),
  };
}

/** Whether regions `p` and `q` of one frame are seen apart, where region `whole` of another frame holds both. */
export function seenApart(
  of: FrameDomains,
  p: number,
  q: number,
  other: FrameDomains,
  whole: number,
  atOf: Placed,
  atOther: Placed,
): boolean {
  const { rows, cols } = pixelShift(atOther, atOf, of.map.pixel);
  return !reachedFrom(p, of, other, rows, cols, whole, (label) => label === p || label === q).has(q);
}

/** Labels of `of` that may hang together with the piece that keeps the identity of the whole in `other`.
 *  @param wholeOf   by label of `of`: label in `other` of the whole that it is a lesser piece of, 0 = of none
 *  @param keptBy    by label of `of`: label in `other` whose identity it has
 *  @param keeperOf  by label of `other`: the piece in `of` that has its identity */
function hangingTogether(
  of: FrameDomains,
  other: FrameDomains,
  shiftRows: number,
  shiftCols: number,
  wholeOf: Int32Array,
  keptBy: Int32Array,
  keeperOf: Int32Array,
): Uint8Array {
  const out = new Uint8Array(of.regions.length + 1);
  const wholes = new Set(wholeOf);
  wholes.delete(0);
  if (wholes.size === 0) return out;
  const beside = besideHidden(of);
  for (const whole of wholes) {
    // most cuts are far from anything hidden: no need to follow them
    if (keeperOf[whole] === 0 || beside[keeperOf[whole]] === 0) continue;
    if (!wholeOf.some((w, label) => w === whole && beside[label] === 1)) continue;
    const reached = reachedFrom(keeperOf[whole], of, other, shiftRows, shiftCols, whole, (label) => {
      return label !== 0 && (wholeOf[label] === whole || keptBy[label] === whole);
    });
    for (const label of reached) if (wholeOf[label] === whole) out[label] = 1;
  }
  return out;
}

/** By label: 1 where the region meets pixels without a state, or the edge. */
function besideHidden(f: FrameDomains): Uint8Array {
  const { rows, cols, states } = f.map;
  const out = new Uint8Array(f.regions.length + 1);
  for (let i = 0, p = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, p++) {
      if (i === 0 || j === 0 || i === rows - 1 || j === cols - 1) out[f.labels[p]] = 1;
      if (states[p] !== NO_STATE) continue;
      for (let a = Math.max(0, i - 1); a <= Math.min(rows - 1, i + 1); a++)
        for (let b = Math.max(0, j - 1); b <= Math.min(cols - 1, j + 1); b++) out[f.labels[a * cols + b]] = 1;
    }
  }
  return out;
}

/** Labels met from the region `start` by going over the pieces of the whole and over hidden pixels. The grid is that of `of`, as large as both frames. */
function reachedFrom(
  start: number,
  of: FrameDomains,
  other: FrameDomains,
  shiftRows: number,
  shiftCols: number,
  whole: number,
  isPiece: (label: number) => boolean,
): Set<number> {
  const { rows, cols, states } = of.map;
  const top = Math.min(0, -shiftRows);
  const left = Math.min(0, -shiftCols);
  const high = Math.max(rows, other.map.rows - shiftRows) - top;
  const wide = Math.max(cols, other.map.cols - shiftCols) - left;
  const corners = of.regions[start - 1].kind === "metallic";
  const state = corners ? METALLIC : INSULATING;
  const open = (q: number): boolean => {
    const i = Math.floor(q / wide) + top;
    const j = (q % wide) + left;
    const inside = i >= 0 && j >= 0 && i < rows && j < cols;
    if (inside) {
      const p = i * cols + j;
      const label = of.labels[p];
      // a region too small for a domain is no barrier
      if (states[p] !== NO_STATE) return label === 0 ? states[p] === state : isPiece(label);
    }
    const io = i + shiftRows;
    const jo = j + shiftCols;
    if (io < 0 || jo < 0 || io >= other.map.rows || jo >= other.map.cols) return inside;
    const there = io * other.map.cols + jo;
    return other.labels[there] === whole || (inside && other.map.states[there] === NO_STATE);
  };
  const seen = new Uint8Array(high * wide);
  const met = new Set<number>([start]);
  const stack: number[] = [];
  for (let p = 0; p < of.labels.length; p++) {
    if (of.labels[p] !== start) continue;
    const q = (Math.floor(p / cols) - top) * wide + (p % cols) - left;
    seen[q] = 1;
    stack.push(q);
  }
  for (let q = stack.pop(); q !== undefined; q = stack.pop()) {
    const i = Math.floor(q / wide);
    const j = q - i * wide;
    for (let a = Math.max(0, i - 1); a <= Math.min(high - 1, i + 1); a++) {
      for (let b = Math.max(0, j - 1); b <= Math.min(wide - 1, j + 1); b++) {
        const next = a * wide + b;
        if (seen[next] === 1 || (!corners && a !== i && b !== j)) continue;
        seen[next] = 1;
        if (!open(next)) continue;
        stack.push(next);
        const inI = a + top;
        const inJ = b + left;
        if (inI >= 0 && inJ >= 0 && inI < rows && inJ < cols) met.add(of.labels[inI * cols + inJ]);
      }
    }
  }
  return met;
}
