import { INSULATING, METALLIC, NO_STATE, type DomainMap } from "../../model/signal.js";

/** Below this share of agreeing pixels a patch is not the domain it covers. */
const AGREEMENT = 0.5;
/** A domain that keeps less than this share of its pixels under the blur is put back. */
const SURVIVAL = 0.3;

/** Makes the field to be contoured agree with the domain map on which domains exist, in place.
 *  Patches of the field that the map does not have (islands below the least area, noise) are turned to their surroundings;
 *  domains of the map that the blur has wiped out are put back at the level's edge.
 *  @returns row-major, 1 on the removed patches */
export function keepMappedDomains(field: Float32Array, map: DomainMap): Uint8Array {
  const { rows, cols, states } = map;
  const n = rows * cols;
  const removed = new Uint8Array(n);
  const seen = new Uint8Array(n);
  for (let p = 0; p < n; p++) {
    seen[p] = Number.isNaN(field[p]) ? NO_STATE : field[p] >= 0.5 ? METALLIC : INSULATING;
  }
  forEachComponent(seen, rows, cols, (pixels, count, state) => {
    let agree = 0;
    for (let k = 0; k < count; k++) if (states[pixels[k]] === state) agree++;
    if (agree >= AGREEMENT * count) return;
    for (let k = 0; k < count; k++) {
      const p = pixels[k];
      removed[p] = 1;
      // just over the line, so that its neighbours keep their own crossing with others
      field[p] = state === METALLIC ? 1 - field[p] - 1e-3 : 1 - field[p] + 1e-3;
    }
  });
  forEachComponent(states, rows, cols, (pixels, count, state) => {
    let kept = 0;
    for (let k = 0; k < count; k++) {
      const v = field[pixels[k]];
      if (state === METALLIC ? v >= 0.5 : v < 0.5) kept++;
    }
    if (kept >= SURVIVAL * count) return;
    for (let k = 0; k < count; k++) {
      const p = pixels[k];
      if (Number.isNaN(field[p])) continue;
      field[p] = state === METALLIC ? Math.max(field[p], 0.55) : Math.min(field[p], 0.45);
      removed[p] = 0;
    }
  });
  return removed;
}

/** Connected components of a state image, metallic ones over 8 neighbours, insulating ones over 4; unmeasured pixels join nothing. */
function forEachComponent(
  states: Uint8Array,
  rows: number,
  cols: number,
  visit: (pixels: Int32Array, count: number, state: number) => void,
): void {
  const done = new Uint8Array(states.length);
  const queue = new Int32Array(states.length);
  for (let start = 0; start < states.length; start++) {
    const state = states[start];
    if (state === NO_STATE || done[start] === 1) continue;
    const corners = state === METALLIC;
    let count = 1;
    queue[0] = start;
    done[start] = 1;
    for (let head = 0; head < count; head++) {
      const p = queue[head];
      const i = Math.floor(p / cols);
      const j = p - i * cols;
      for (let di = -1; di <= 1; di++) {
        for (let dj = -1; dj <= 1; dj++) {
          if (!corners && di !== 0 && dj !== 0) continue;
          const a = i + di;
          const b = j + dj;
          if (a < 0 || b < 0 || a >= rows || b >= cols) continue;
          const q = a * cols + b;
          if (done[q] === 1 || states[q] !== state) continue;
          done[q] = 1;
          queue[count++] = q;
        }
      }
    }
    visit(queue, count, state);
  }
}
