import { expect, test } from "vitest";
import { INSULATING, METALLIC, NO_STATE } from "../../src/model/signal.js";
import { makeRandom } from "../../src/numerics/random.js";
import { regionSizes } from "../../src/store/verify_images.js";

/** The slow and plain way: every pixel asks its neighbours. */
function flooded(states: Uint8Array, rows: number, cols: number, state: number): number[] {
  const seen = new Set<number>();
  const sizes: number[] = [];
  for (let start = 0; start < states.length; start++) {
    if (states[start] !== state || seen.has(start)) continue;
    const queue = [start];
    seen.add(start);
    for (let k = 0; k < queue.length; k++) {
      const [i, j] = [Math.floor(queue[k] / cols), queue[k] % cols];
      for (let a = i - 1; a <= i + 1; a++) {
        for (let b = j - 1; b <= j + 1; b++) {
          if (a < 0 || b < 0 || a >= rows || b >= cols) continue;
          if (state === INSULATING && a !== i && b !== j) continue;
          const q = a * cols + b;
          if (states[q] === state && !seen.has(q)) {
            seen.add(q);
            queue.push(q);
          }
        }
      }
    }
    sizes.push(queue.length);
  }
  return sizes.sort((x, y) => y - x);
}

test("runs joined row by row are the regions of a flood fill, on maps of every density", () => {
  const random = makeRandom(7);
  for (let n = 0; n < 300; n++) {
    const rows = 1 + random.below(14);
    const cols = 1 + random.below(14);
    const metallic = random.uniform();
    const states = Uint8Array.from({ length: rows * cols }, () =>
      random.uniform() < 0.05 ? NO_STATE : random.uniform() < metallic ? METALLIC : INSULATING,
    );
    for (const state of [METALLIC, INSULATING])
      expect(regionSizes(states, rows, cols, state)).toEqual(flooded(states, rows, cols, state));
  }
});

test("metallic regions join over corners, insulating ones do not", () => {
  const checkers = Uint8Array.of(0, 1, 1, 0);
  expect(regionSizes(checkers, 2, 2, METALLIC)).toEqual([2]);
  expect(regionSizes(checkers, 2, 2, INSULATING)).toEqual([1, 1]);
});
