import { INSULATING, METALLIC, NO_STATE } from "../../model/signal.js";
import { regionsOf, type Regions } from "./regions.js";

/** What is left of a state in a map after its small islands have been given to the other one. */
export interface Cleared {
  /** Areas in pixels of the islands kept, a state, over all of the map. */
  readonly largestPx: readonly [number, number];
  readonly totalPx: readonly [number, number];
}

/** Gives islands below the least area to the state around them, in place: first metallic ones (joined over corners), then insulating
 *  ones (joined over sides).
 *  @param mayStay asked for islands large enough; those refused are given away too */
export function clearIslands(
  states: Uint8Array,
  rows: number,
  cols: number,
  leastPx: number,
  mayStay: (pixels: Int32Array, state: 0 | 1) => boolean,
): Cleared {
  const largest: [number, number] = [0, 0];
  const total: [number, number] = [0, 0];
  for (const state of [METALLIC, INSULATING] as const) {
    const other = state === METALLIC ? INSULATING : METALLIC;
    const islands = regionsOf(states, state, rows, cols, state === METALLIC ? 8 : 4);
    islands.sizes.forEach((size, k) => {
      // the test of single islands is for small ones: a large one is a domain
      if (size < leastPx || (size < 20 * leastPx && !mayStay(pixelsOf(islands, k), state))) {
        islands.forRuns(k, (from, to) => states.fill(other, from, to));
        return;
      }
      largest[state] = Math.max(largest[state], size);
      total[state] += size;
    });
  }
  return { largestPx: largest, totalPx: total };
}

function pixelsOf(islands: Regions, k: number): Int32Array {
  const out = new Int32Array(islands.sizes[k]);
  let n = 0;
  islands.forRuns(k, (from, to) => {
    for (let p = from; p < to; p++) out[n++] = p;
  });
  return out;
}

/** Sizes in pixels of the connected spots that hide the sample in rows that were scanned: debris and scars. */
export function hiddenSpots(usable: Uint8Array, rows: number, cols: number): readonly number[] {
  const hidden = new Uint8Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    const row = usable.subarray(i * cols, (i + 1) * cols);
    if (row.includes(1)) for (let j = 0; j < cols; j++) hidden[i * cols + j] = 1 - row[j];
  }
  return regionsOf(hidden, 1, rows, cols, 4).sizes;
}

/** Sets all pixels with a state to one. */
export function fillState(states: Uint8Array, state: 0 | 1): void {
  for (let p = 0; p < states.length; p++) if (states[p] !== NO_STATE) states[p] = state;
}
