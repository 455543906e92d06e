import { CYCLIC_PHASE_MAP, AMPLITUDE_MAP, HEIGHT_MAP, PHASE_MAP, type ColourMap } from "./colour_maps.js";

export type Shown = "amplitude" | "phase" | "topography" | "states";

/** A stored preview as pixels: its codes with their alpha, two bytes a pixel, and what the codes stand for. */
export interface Codes {
  readonly rows: number;
  readonly cols: number;
  readonly low: number;
  readonly high: number;
  /** Code and alpha in turn, row-major. */
  readonly codes: Uint8Array;
}

/** The values that a preview was made from, to half a code; NaN where it is transparent. */
export function valuesOf(p: Codes): Float32Array {
  const out = new Float32Array(p.rows * p.cols);
  for (let k = 0; k < out.length; k++)
    out[k] = p.codes[2 * k + 1] === 0 ? Number.NaN : p.low + (p.codes[2 * k] / 255) * (p.high - p.low);
  return out;
}

export interface ColourScale {
  readonly low: number;
  readonly high: number;
  readonly map: ColourMap;
  /** True where the map goes round: values are taken modulo high − low. */
  readonly cyclic: boolean;
}

/** One scale for several images: from the 1st to the 99th percentile of all values. A phase that spans more than π gets the map that goes
 *  round, over a whole turn. */
export function commonScale(shown: Exclude<Shown, "states">, images: readonly Float32Array[]): ColourScale {
  const all = Float32Array.from(images.flatMap((v) => Array.from(v.filter((x) => !Number.isNaN(x))))).sort();
  const at = (share: number): number => all[Math.round(share * (all.length - 1))] ?? 0;
  const [low, high] = [at(0.01), at(0.99)];
  if (shown === "phase" && high - low > Math.PI)
    return { low: -Math.PI, high: Math.PI, map: mapOf(shown, true), cyclic: true };
  return { low, high: high > low ? high : low + 1, map: mapOf(shown, false), cyclic: false };
}

/** The colours of a channel. */
export function mapOf(shown: Exclude<Shown, "states">, cyclic: boolean): ColourMap {
  if (shown === "phase") return cyclic ? CYCLIC_PHASE_MAP : PHASE_MAP;
  return shown === "topography" ? HEIGHT_MAP : AMPLITUDE_MAP;
}

/** RGBA pixels of an image on a scale; transparent where nothing was measured. */
export function paint(values: Float32Array, scale: ColourScale): Uint8Array {
  const out = new Uint8Array(4 * values.length);
  const span = scale.high - scale.low;
  for (let k = 0; k < values.length; k++) {
    if (Number.isNaN(values[k])) continue;
    let v = (values[k] - scale.low) / span;
    if (scale.cyclic) v -= Math.floor(v);
    const [r, g, b] = scale.map(Math.min(1, Math.max(0, v)));
    out.set([Math.round(r), Math.round(g), Math.round(b), 255], 4 * k);
  }
  return out;
}

/** RGBA pixels of a map of the two states (0 insulating, 1 metallic; anything else transparent). */
export function paintStates(
  states: Uint8Array,
  insulating: readonly number[],
  metallic: readonly number[],
): Uint8Array {
  const out = new Uint8Array(4 * states.length);
  for (let k = 0; k < states.length; k++) {
    if (states[k] > 1) continue;
    out.set(states[k] === 0 ? insulating : metallic, 4 * k);
    out[4 * k + 3] = 255;
  }
  return out;
}
