import { INSULATING, METALLIC, NO_STATE, type DomainMap } from "../../../src/model/signal.js";
import { makeRandom } from "../../../src/numerics/random.js";

/** A map from text: `#` metallic, `.` insulating, `?` unmeasured. */
export function mapOf(lines: readonly string[], pixel = { xNm: 10, yNm: 10 }): DomainMap {
  const rows = lines.length;
  const cols = lines[0].length;
  const code: Record<string, number> = { "#": METALLIC, "1": METALLIC, "?": NO_STATE };
  const states = Uint8Array.from(lines.join(""), (c) => code[c] ?? INSULATING);
  return { rows, cols, pixel, states };
}

/** A map from a test of positions in nm. */
export function mapFrom(
  rows: number,
  cols: number,
  pixel: { xNm: number; yNm: number },
  metallic: (xNm: number, yNm: number) => boolean,
): DomainMap {
  const states = new Uint8Array(rows * cols);
  for (let i = 0; i < rows; i++)
    for (let j = 0; j < cols; j++)
      states[i * cols + j] = metallic(j * pixel.xNm, i * pixel.yNm) ? METALLIC : INSULATING;
  return { rows, cols, pixel, states };
}

/** A smooth random field of the plane with unit variance, known everywhere: a sum of plane waves. Part of it changes with time. */
export function randomField(seed: number, lengthNm: number): (xNm: number, yNm: number, t: number) => number {
  const random = makeRandom(seed);
  const waves = Array.from({ length: 60 }, () => {
    // A Gaussian spectrum: correlation length `lengthNm`.
    return {
      kx: random.normal() / lengthNm,
      ky: random.normal() / lengthNm,
      phase: random.uniform() * 2 * Math.PI,
      turn: random.normal() * 0.35,
    };
  });
  const a = Math.sqrt(2 / waves.length);
  return (x, y, t) => {
    let sum = 0;
    for (const w of waves) sum += Math.cos(w.kx * x + w.ky * y + w.phase + w.turn * t);
    return a * sum;
  };
}
