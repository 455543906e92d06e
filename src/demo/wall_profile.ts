import { RISE_PER_W } from "../model/units.js";
import type { CooldownSpec } from "./spec.js";

/** The two states' complex near-field signal at one temperature, before gain. */
export interface StateLevels {
  readonly amplitudeInsulating: number;
  readonly amplitudeMetallic: number;
  readonly phaseInsulatingRad: number;
  readonly phaseMetallicRad: number;
}

export function levelsAt(spec: CooldownSpec, temperatureK: number): StateLevels {
  const l = spec.levels;
  const dT = temperatureK - spec.transition.coolingHalfK;
  return {
    amplitudeInsulating: l.amplitudeInsulating * (1 + l.insulatingSlopePerK * dT),
    amplitudeMetallic: l.amplitudeMetallic * (1 + l.metallicSlopePerK * dT),
    phaseInsulatingRad: l.phaseInsulatingRad,
    phaseMetallicRad: l.phaseMetallicRad,
  };
}

/** 10–90 % width of the walls at one temperature, never below 0. */
export function widthAt(spec: CooldownSpec, temperatureK: number): number {
  return Math.max(0, spec.wall.widthNm + spec.wall.slopeNmPerK * (temperatureK - spec.transition.coolingHalfK));
}

/** How far from a wall its signal differs from the plateau, nm: tanh to 3e-7, a fringe to e^{−6} of its amplitude. */
export function reachOf(spec: CooldownSpec, temperatureK: number): number {
  const w = widthAt(spec, temperatureK) / RISE_PER_W;
  return Math.max(7.5 * w, spec.fringe.amplitudeRad === 0 ? 0 : Math.min(6 * spec.fringe.decayNm, 1200));
}

/** The complex signal against signed distance, tabulated. */
export interface ProfileTable {
  readonly re: Float64Array;
  readonly im: Float64Array;
  /** Distance of the first entry, and between entries. */
  readonly firstNm: number;
  readonly stepNm: number;
}

/** z(d) = [(1−u) z_I + u z_M]·fringe factor with u = ½(1 + tanh(d/w)), convolved with a narrow Gaussian of standard deviation
 *  `smoothNm` so that a sharp wall or a fringe that begins with a jump can be summed on a grid: the grid's own blur is narrower by
 *  just that much. The convolution is a trapezoid sum at smoothNm/16 with a node on the jump: 1e-4 of the jump at worst. */
export function profileTable(spec: CooldownSpec, temperatureK: number, smoothNm: number): ProfileTable {
  const w = widthAt(spec, temperatureK) / RISE_PER_W;
  const l = levelsAt(spec, temperatureK);
  const zi = [
    l.amplitudeInsulating * Math.cos(l.phaseInsulatingRad),
    l.amplitudeInsulating * Math.sin(l.phaseInsulatingRad),
  ];
  const zm = [l.amplitudeMetallic * Math.cos(l.phaseMetallicRad), l.amplitudeMetallic * Math.sin(l.phaseMetallicRad)];
  const f = spec.fringe;
  const shift = (distanceNm: number): number =>
    f.amplitudeRad * Math.cos((2 * Math.PI * distanceNm) / f.periodNm + f.phaseRad) * Math.exp(-distanceNm / f.decayNm);
  /** Phase that the fringe adds; exactly on the wall there is one value from each side. */
  const fringePhase = (d: number, fromMetal: boolean): number => {
    const onMetal = d > 0 || (d === 0 && fromMetal);
    return f.amplitudeRad !== 0 && onMetal === (f.side === "metallic") ? shift(Math.abs(d)) : 0;
  };
  const step = smoothNm > 0 ? smoothNm / 16 : 0.1;
  const taps = smoothNm > 0 ? 6 * 16 : 0;
  const half = Math.ceil((reachOf(spec, temperatureK) + 6 * smoothNm + 1) / step);
  const n = 2 * half + 1;
  const rawRe = new Float64Array(n + 2 * taps);
  const rawIm = new Float64Array(n + 2 * taps);
  for (let k = 0; k < rawRe.length; k++) {
    const d = (k - half - taps) * step;
    const u = w > 0 ? 0.5 * (1 + Math.tanh(d / w)) : 0.5 * (1 + Math.sign(d));
    const re = (1 - u) * zi[0] + u * zm[0];
    const im = (1 - u) * zi[1] + u * zm[1];
    if (d !== 0) {
      const a = fringePhase(d, false);
      rawRe[k] = re * Math.cos(a) - im * Math.sin(a);
      rawIm[k] = re * Math.sin(a) + im * Math.cos(a);
    } else {
      for (const fromMetal of [false, true]) {
        const a = fringePhase(0, fromMetal);
        const r = w > 0 ? re : fromMetal ? zm[0] : zi[0];
        const i = w > 0 ? im : fromMetal ? zm[1] : zi[1];
        rawRe[k] += 0.5 * (r * Math.cos(a) - i * Math.sin(a));
        rawIm[k] += 0.5 * (r * Math.sin(a) + i * Math.cos(a));
      }
    }
  }
  const kernel = Float64Array.from({ length: 2 * taps + 1 }, (_, k) =>
    taps === 0 ? 1 : Math.exp(-0.5 * (((k - taps) * step) / smoothNm) ** 2),
  );
  const total = kernel.reduce((a, b) => a + b, 0);
  const re = new Float64Array(n);
  const im = new Float64Array(n);
  for (let k = 0; k < n; k++) {
    let sr = 0;
    let si = 0;
    for (let t = 0; t < kernel.length; t++) {
      sr += kernel[t] * rawRe[k + t];
      si += kernel[t] * rawIm[k + t];
    }
    re[k] = sr / total;
    im[k] = si / total;
  }
  return { re, im, firstNm: -half * step, stepNm: step };
}
