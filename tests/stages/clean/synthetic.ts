import type { RawFrame } from "../../../src/model/cooldown.js";
import { makeRaster } from "../../../src/model/raster.js";
import { makeRandom } from "../../../src/numerics/random.js";

export interface SyntheticOptions {
  readonly rows?: number;
  readonly cols?: number;
  readonly seed: number;
  /** "metallic": one state; "mixed": domains; "along-rows": one straight wall along the rows, in the middle. */
  readonly scene?: "metallic" | "mixed" | "along-rows";
  readonly domainPx?: number;
  readonly wallPx?: number;
  readonly amplitudeNoise?: number;
  readonly phaseNoiseRad?: number;
  readonly topographyNoiseNm?: number;
  readonly rowGainSd?: number;
  readonly rowPhaseSdRad?: number;
  readonly rowPhaseStepRad?: number;
  readonly topographyRowSdNm?: number;
  readonly scars?: number;
  readonly unmeasuredRows?: readonly number[];
}

export interface Synthetic {
  readonly raw: RawFrame;
  readonly rows: number;
  readonly cols: number;
  /** Share of the metallic state, 0–1. */
  readonly share: Float32Array;
  /** Noise-free, without any row's gain or offset. */
  readonly amplitude: Float32Array;
  readonly phase: Float32Array;
  readonly topography: Float32Array;
  /** Scars as put in; 1 in amplitude (and phase). */
  readonly scarMask: Uint8Array;
}

const INSULATING = { amplitude: 1, phaseRad: 0.3 };
const METALLIC = { amplitude: 2.2, phaseRad: 0.9 };

/** A frame with known content and known faults. The scene is a level set of a sum of random waves. */
export function synthetic(o: SyntheticOptions): Synthetic {
  const rows = o.rows ?? 128;
  const cols = o.cols ?? 128;
  const random = makeRandom(o.seed);
  const n = rows * cols;
  const waves = Array.from({ length: 24 }, () => {
    const k = (2 * Math.PI) / (o.domainPx ?? 60) / (0.7 + 0.6 * random.uniform());
    const a = 2 * Math.PI * random.uniform();
    return { kx: k * Math.cos(a), ky: k * Math.sin(a), at: 2 * Math.PI * random.uniform() };
  });
  const relief = Array.from({ length: 60 }, () => {
    const k = (2 * Math.PI) / (12 + 30 * random.uniform());
    const a = 2 * Math.PI * random.uniform();
    return { kx: k * Math.cos(a), ky: k * Math.sin(a), at: 2 * Math.PI * random.uniform() };
  });
  const share = new Float32Array(n);
  const amplitude = new Float32Array(n);
  const phase = new Float32Array(n);
  const topography = new Float32Array(n);
  const raw = { amplitude: new Float32Array(n), phase: new Float32Array(n), topography: new Float32Array(n) };
  const wallPx = o.wallPx ?? 4;
  let walk = 0;
  for (let i = 0; i < rows; i++) {
    walk += (o.rowPhaseStepRad ?? 0) * random.normal();
    const gain = Math.exp((o.rowGainSd ?? 0) * random.normal());
    const offsetRad = walk + (o.rowPhaseSdRad ?? 0) * random.normal();
    const offsetNm = (o.topographyRowSdNm ?? 0) * random.normal();
    for (let j = 0; j < cols; j++) {
      const p = i * cols + j;
      let u = 1;
      if (o.scene === "along-rows") u = 0.5 * (1 + Math.tanh((i - rows / 2 + 3 * Math.sin(j / 40)) / wallPx));
      else if (o.scene === "mixed") {
        let f = 0;
        let fx = 0;
        let fy = 0;
        for (const w of waves) {
          const t = w.kx * j + w.ky * i + w.at;
          f += Math.cos(t);
          fx -= w.kx * Math.sin(t);
          fy -= w.ky * Math.sin(t);
        }
        u = 0.5 * (1 + Math.tanh(f / Math.hypot(fx, fy, 0.05) / wallPx));
      }
      share[p] = u;
      const re =
        (1 - u) * INSULATING.amplitude * Math.cos(INSULATING.phaseRad) +
        u * METALLIC.amplitude * Math.cos(METALLIC.phaseRad);
      const im =
        (1 - u) * INSULATING.amplitude * Math.sin(INSULATING.phaseRad) +
        u * METALLIC.amplitude * Math.sin(METALLIC.phaseRad);
      amplitude[p] = Math.hypot(re, im);
      phase[p] = Math.atan2(im, re);
      let h = 0;
      for (const w of relief) h += 0.15 * Math.cos(w.kx * j + w.ky * i + w.at);
      topography[p] = h;
      raw.amplitude[p] = gain * amplitude[p] + (o.amplitudeNoise ?? 0.05) * random.normal();
      const turned = phase[p] + offsetRad + (o.phaseNoiseRad ?? 0.035) * random.normal();
      raw.phase[p] = turned - 2 * Math.PI * Math.round(turned / (2 * Math.PI));
      const tilt = 4 * (j / cols) - 3 * (i / rows) + 2 * (j / cols) ** 2;
      raw.topography[p] = h + tilt + offsetNm + (o.topographyNoiseNm ?? 0.12) * random.normal();
    }
  }
  const scarMask = new Uint8Array(n);
  for (let k = 0; k < (o.scars ?? 0); k++) {
    const i = 2 + random.below(rows - 4);
    const length = 5 + random.below(30);
    const from = random.below(Math.max(1, cols - length));
    const size = (random.uniform() < 0.5 ? -1 : 1) * (0.4 + 0.4 * random.uniform());
    for (let j = from; j < Math.min(cols, from + length); j++) {
      const p = i * cols + j;
      scarMask[p] = 1;
      raw.amplitude[p] = Math.max(0.05, raw.amplitude[p] + size);
      raw.phase[p] += 0.5 * size;
      raw.topography[p] += 6 * size;
    }
  }
  for (const i of o.unmeasuredRows ?? []) {
    for (const c of [raw.amplitude, raw.phase, raw.topography]) c.fill(Number.NaN, i * cols, (i + 1) * cols);
  }
  const pixel = { xNm: 10, yNm: 10 };
  return {
    raw: {
      frame: 0,
      topography: makeRaster(raw.topography, rows, cols, pixel),
      amplitude: makeRaster(raw.amplitude, rows, cols, pixel),
      phase: makeRaster(raw.phase, rows, cols, pixel),
    },
    rows,
    cols,
    share,
    amplitude,
    phase,
    topography,
    scarMask,
  };
}
