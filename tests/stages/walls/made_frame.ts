import { makeRaster, type PixelSize } from "../../../src/model/raster.js";
import type { FrameStates, Signal } from "../../../src/model/signal.js";
import { FWHM_PER_SIGMA, RISE_PER_W } from "../../../src/model/units.js";
import { fastKink } from "../../../src/numerics/kink.js";
import { makeRandom } from "../../../src/numerics/random.js";

export interface MadeFrame {
  readonly signal: Signal;
  readonly states: FrameStates;
}

export interface Recipe {
  readonly rows?: number;
  readonly cols?: number;
  readonly pixel?: PixelSize;
  /** Signed distance from the wall of a point in nm, metallic positive. */
  readonly distance: (xNm: number, yNm: number) => number;
  readonly widthNm: number;
  readonly tipNm?: number;
  /** Standard deviation per component; the contrast of the default levels is 1.49. */
  readonly noise: number;
  readonly seed: number;
  readonly phase?: boolean;
  /** Complex signal against distance instead of the two-state kink. */
  readonly profile?: (d: number) => readonly [number, number];
  /** Noise correlated along x: an autoregressive filter with this coefficient. */
  readonly rhoX?: number;
  readonly unusable?: (row: number, col: number) => boolean;
}

export const LEVEL_I = { re: 1, im: 0 };
export const LEVEL_M = { re: 2.2 * Math.cos(0.6), im: 2.2 * Math.sin(0.6) };

/** A frame in closed form: the convolved kink of the exact distance, sampled at pixel centres, white or filtered noise, levels known. */
export function makeFrame(r: Recipe): MadeFrame {
  const { rows = 96, cols = 96, pixel = { xNm: 10, yNm: 10 }, tipNm = 30, phase = true, rhoX = 0 } = r;
  const random = makeRandom(r.seed);
  const n = rows * cols;
  const re = new Float32Array(n);
  const im = new Float32Array(n);
  const share = new Float32Array(n).fill(Number.NaN);
  const states = new Uint8Array(n).fill(255);
  const usable = new Uint8Array(n);
  const metallic = phase ? LEVEL_M : { re: 2.2, im: 0 };
  const dre = metallic.re - LEVEL_I.re;
  const dim = metallic.im - LEVEL_I.im;
  const u = new Float64Array(4);
  const fresh = Math.sqrt(1 - rhoX * rhoX);
  for (let i = 0, p = 0; i < rows; i++) {
    let er = random.normal();
    let ei = random.normal();
    for (let j = 0; j < cols; j++, p++) {
      if (j > 0) {
        er = rhoX * er + fresh * random.normal();
        ei = rhoX * ei + fresh * random.normal();
      }
      if (r.unusable?.(i, j) === true) continue;
      const d = r.distance(j * pixel.xNm, i * pixel.yNm);
      let z: readonly [number, number];
      if (r.profile !== undefined) z = r.profile(d);
      else {
        fastKink(d, r.widthNm / RISE_PER_W, tipNm / FWHM_PER_SIGMA, u);
        z = [LEVEL_I.re + dre * u[0], LEVEL_I.im + dim * u[0]];
      }
      re[p] = z[0] + r.noise * er;
      im[p] = phase ? z[1] + r.noise * ei : 0;
      usable[p] = 1;
      share[p] = ((re[p] - LEVEL_I.re) * dre + (im[p] - LEVEL_I.im) * dim) / (dre * dre + dim * dim);
      states[p] = d >= 0 ? 1 : 0;
    }
  }
  const variance = Math.max(r.noise, 1e-4) ** 2;
  const noise = { rr: variance, ri: 0, ii: variance };
  return {
    signal: { frame: 0, rows, cols, pixel, re, im: phase ? im : null, usable },
    states: {
      frame: 0,
      levels: {
        frame: 0,
        verdict: "mixed",
        insulating: LEVEL_I,
        metallic,
        noiseInsulating: noise,
        noiseMetallic: noise,
        noiseCorrelationX: rhoX,
        noiseCorrelationY: 0,
        gain: 1,
        thresholdSd: 0,
      },
      share: makeRaster(share, rows, cols, pixel),
      map: { rows, cols, pixel, states },
      fraction: null,
    },
  };
}

/** A straight wall through (x, y) whose normal to the metallic side points at `normalDeg` as in the tables (y up the page). */
export function straight(xNm: number, yNm: number, normalDeg: number): (x: number, y: number) => number {
  const nx = Math.cos((normalDeg * Math.PI) / 180);
  const ny = -Math.sin((normalDeg * Math.PI) / 180);
  return (x, y) => (x - xNm) * nx + (y - yNm) * ny;
}

export const disc =
  (xNm: number, yNm: number, radiusNm: number) =>
  (x: number, y: number): number =>
    radiusNm - Math.hypot(x - xNm, y - yNm);

export const mean = (v: readonly number[]): number => v.reduce((a, b) => a + b, 0) / v.length;
export function sd(v: readonly number[]): number {
  const m = mean(v);
  return Math.sqrt(mean(v.map((x) => (x - m) ** 2)));
}
