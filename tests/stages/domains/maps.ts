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

/** A smooth random field of the plane with unit variance, known everywhere: a sum of plane waves whose phases turn with time.
 *  Its values on a grid: `at(rows, cols, pxNm, x0Nm, y0Nm, t)`. */
export function randomField(seed: number, lengthNm: number) {
  const random = makeRandom(seed);
  // A Gaussian spectrum: correlation length `lengthNm`.
  const waves = Array.from({ length: 32 }, () => ({
    kx: random.normal() / lengthNm,
    ky: random.normal() / lengthNm,
    phase: random.uniform() * 2 * Math.PI,
    turn: random.normal() * 0.35,
  }));
  const a = Math.sqrt(2 / waves.length);
  return (rows: number, cols: number, pxNm: number, x0Nm: number, y0Nm: number, t: number): Float64Array => {
    const out = new Float64Array(rows * cols);
    const c = new Float64Array(cols);
    const s = new Float64Array(cols);
    for (const w of waves) {
      for (let j = 0; j < cols; j++) {
        c[j] = a * Math.cos(w.kx * (x0Nm + j * pxNm));
        s[j] = a * Math.sin(w.kx * (x0Nm + j * pxNm));
      }
      for (let i = 0; i < rows; i++) {
        const angle = w.ky * (y0Nm + i * pxNm) + w.phase + w.turn * t;
        const ci = Math.cos(angle);
        const si = Math.sin(angle);
        for (let j = 0, p = i * cols; j < cols; j++, p++) out[p] += c[j] * ci - s[j] * si;
      }
    }
    return out;
  };
}
