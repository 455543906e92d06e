import type { FrameLevels, NoiseCovariance } from "../../model/signal.js";

/** The two states' levels and the line between them in the complex plane. */
export interface Chord {
  readonly insulating: { readonly re: number; readonly im: number };
  readonly metallic: { readonly re: number; readonly im: number };
  /** Unit vector from the insulating to the metallic level. */
  readonly ex: number;
  readonly ey: number;
  readonly length: number;
  /** Component of each level along the chord: a small turn φ of the phase moves the signal by φ times this across the chord. */
  readonly alongInsulating: number;
  readonly alongMetallic: number;
  /** Distance of the chord from the origin, signed: component of every point of it across. */
  readonly height: number;
  /** Standard deviation of the noise across the chord. */
  readonly noiseInsulating: number;
  readonly noiseMetallic: number;
}

/** null where the levels are not apart, or nothing is known of the noise. */
export function chordOf(levels: FrameLevels): Chord | null {
  const { insulating, metallic } = levels;
  const dx = metallic.re - insulating.re;
  const dy = metallic.im - insulating.im;
  const length = Math.hypot(dx, dy);
  if (!(length > 0)) return null;
  const ex = dx / length;
  const ey = dy / length;
  const across = (c: NoiseCovariance): number => Math.sqrt(ey * ey * c.rr - 2 * ex * ey * c.ri + ex * ex * c.ii);
  const noiseInsulating = across(levels.noiseInsulating);
  const noiseMetallic = across(levels.noiseMetallic);
  if (!(noiseInsulating > 0 && noiseMetallic > 0)) return null;
  return {
    insulating,
    metallic,
    ex,
    ey,
    length,
    alongInsulating: insulating.re * ex + insulating.im * ey,
    alongMetallic: metallic.re * ex + metallic.im * ey,
    height: insulating.im * ex - insulating.re * ey,
    noiseInsulating,
    noiseMetallic,
  };
}

/** Component of the signal across the chord, counted from the chord: 0 for every mixture of the two states, whatever the blur, the
 *  shape of the wall or how many of them; NaN where unusable. */
export function acrossChord(re: Float32Array, im: Float32Array, usable: Uint8Array, c: Chord): Float32Array {
  const out = new Float32Array(re.length);
  for (let p = 0; p < re.length; p++) {
    out[p] = usable[p] === 0 ? Number.NaN : im[p] * c.ex - re[p] * c.ey - c.height;
  }
  return out;
}
