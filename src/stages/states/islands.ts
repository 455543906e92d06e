import { INSULATING, METALLIC, NO_STATE } from "../../model/signal.js";
import { connectedComponents } from "../../raster/opencv.js";

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
    const mask = new Uint8Array(states.length);
    let any = false;
    for (let p = 0; p < mask.length; p++) {
      if (states[p] === state) {
        mask[p] = 1;
        any = true;
      }
    }
    if (!any) continue;
    const { count, labels } = connectedComponents(mask, rows, cols, state === METALLIC ? 8 : 4);
    const sizes = new Int32Array(count + 1);
    for (const l of labels) sizes[l]++;
    const remove = new Uint8Array(count + 1);
    const other = state === METALLIC ? INSULATING : METALLIC;
    for (let l = 1; l <= count; l++) {
      if (sizes[l] < leastPx) remove[l] = 1;
      // the test of single islands is for small ones: a large one is a domain
      else if (sizes[l] < 20 * leastPx && !mayStay(pixelsOf(labels, l, sizes[l]), state)) remove[l] = 1;
      if (remove[l] === 1) continue;
      largest[state] = Math.max(largest[state], sizes[l]);
      total[state] += sizes[l];
    }
    for (let p = 0; p < labels.length; p++) if (labels[p] > 0 && remove[labels[p]] === 1) states[p] = other;
  }
  return { largestPx: largest, totalPx: total };
}

function pixelsOf(labels: Int32Array, label: number, size: number): Int32Array {
  const out = new Int32Array(size);
  let k = 0;
  for (let p = 0; p < labels.length; p++) if (labels[p] === label) out[k++] = p;
  return out;
}

/** Sets all pixels with a state to one. */
export function fillState(states: Uint8Array, state: 0 | 1): void {
  for (let p = 0; p < states.length; p++) if (states[p] !== NO_STATE) states[p] = state;
}
