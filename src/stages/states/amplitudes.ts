import type { ComplexValue } from "../../model/signal.js";
import type { Levels } from "./cell_levels.js";
import { SIDE } from "./cells.js";
import type { Pixels } from "./pixels.js";
import type { PureCells } from "./pure.js";

/** The levels with their amplitudes taken from |z| instead of the mean of z: where a fringe still turns pixels of a state, their mean is
 *  short by half the mean square of the turn, their amplitudes are not. Noise across the level (variance `across`) lengthens |z| by
 *  across/(2|z|), which is taken off. Pixels whose squared residual exceeds their state's limit are left out. */
export function amplitudesOf(
  z: Pixels,
  pure: PureCells,
  levels: Levels,
  across: readonly [number, number],
  limits: readonly [number, number],
): Levels {
  const seen = [0, 0];
  const expected = [0, 0];
  const [a0, a1] = levels;
  for (let i = 0; i < z.rows; i++) {
    const row = Math.floor(i / SIDE) * pure.cols;
    for (let first = 0, c = row; first < z.cols; first += SIDE, c++) {
      const k = pure.state[c];
      if (k > 1) continue;
      const u = pure.share[c];
      const er = a0.re + u * (a1.re - a0.re);
      const ei = a0.im + u * (a1.im - a0.im);
      let n = 0;
      let sum = 0;
      const last = Math.min(z.cols, first + SIDE);
      for (let j = first, p = i * z.cols + first; j < last; j++, p++) {
        const re = z.re[p];
        const im = z.im[p];
        if (z.usable[p] === 0 || (re - er) * (re - er) + (im - ei) * (im - ei) > limits[k]) continue;
        n++;
        sum += Math.sqrt(re * re + im * im);
      }
      const m = Math.sqrt(er * er + ei * ei);
      seen[k] += sum - (n * across[k]) / (2 * m);
      expected[k] += n * m;
    }
  }
  const scaled = (k: 0 | 1): ComplexValue => {
    const g = expected[k] > 0 ? seen[k] / expected[k] : 1;
    return { re: levels[k].re * g, im: levels[k].im * g };
  };
  return [scaled(0), scaled(1)];
}
