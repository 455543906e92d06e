import { childSeed, makeRandom, type Random } from "../numerics/random.js";
import { bumpNm, distanceToParticle, extentOf } from "./debris.js";
import { PART } from "./domain_field.js";
import { latticeField } from "./lattice_field.js";
import type { NearField, Place } from "./near_field.js";
import type { CooldownSpec, Particle } from "./spec.js";

/** What the instrument made of one frame, row-major [rows, cols]; NaN = not measured. */
export interface Recorded {
  readonly topographyNm: Float32Array;
  readonly amplitude: Float32Array;
  readonly phaseRad: Float32Array;
  /** 1 where the row was measured. */
  readonly measured: Uint8Array;
  readonly scars: number;
}

const TURN = 2 * Math.PI;
const wrap = (a: number): number => a - TURN * Math.ceil(a / TURN - 0.5);

/** Unit-variance noise, white or smoothed by a Gaussian along each axis. */
function noiseField(random: Random, rows: number, cols: number, sxPx: number, syPx: number): Float64Array {
  const rx = Math.ceil(4 * sxPx);
  const ry = Math.ceil(4 * syPx);
  const w = cols + 2 * rx;
  const h = rows + 2 * ry;
  const white = new Float64Array(w * h);
  for (let k = 0; k < white.length; k++) white[k] = random.normal();
  if (rx === 0 && ry === 0) return white;
  const taps = (s: number, r: number): Float64Array => {
    const k = Float64Array.from({ length: 2 * r + 1 }, (_, t) => (r === 0 ? 1 : Math.exp(-0.5 * ((t - r) / s) ** 2)));
    const norm = Math.sqrt(k.reduce((a, b) => a + b * b, 0));
    return k.map((v) => v / norm);
  };
  const kx = taps(sxPx, rx);
  const ky = taps(syPx, ry);
  const lines = new Float64Array(h * cols);
  for (let i = 0; i < h; i++)
    for (let j = 0; j < cols; j++) {
      let sum = 0;
      for (let t = 0; t < kx.length; t++) sum += kx[t] * white[i * w + j + t];
      lines[i * cols + j] = sum;
    }
  const out = new Float64Array(rows * cols);
  for (let i = 0; i < rows; i++)
    for (let t = 0; t < ky.length; t++)
      for (let j = 0; j < cols; j++) out[i * cols + j] += ky[t] * lines[(i + t) * cols + j];
  return out;
}

/** A value a row: white part and random walk, mean 0 over the frame. */
function rowValues(random: Random, rows: number, sd: number, walkSd: number): Float64Array {
  const out = new Float64Array(rows);
  let walk = 0;
  for (let i = 0; i < rows; i++) {
    walk += walkSd * random.normal();
    out[i] = walk + sd * random.normal();
  }
  const mean = out.reduce((a, b) => a + b, 0) / rows;
  return out.map((v) => v - mean);
}

/** The sample's height at the frame's pixels: roughness, waviness and debris, all fixed to the sample. */
export function sampleHeightNm(spec: CooldownSpec, at: Place, particles: readonly Particle[]): Float64Array {
  const { rows, cols, pixel, topography: t } = spec;
  const out = new Float64Array(rows * cols);
  const line = new Float64Array(cols);
  for (const [part, rms, scale] of [
    [PART.roughness, t.roughnessNm, t.roughnessScaleNm],
    [PART.waviness, t.wavinessNm, t.wavinessScaleNm],
  ] as const) {
    if (rms === 0) continue;
    const field = latticeField([{ seed: childSeed(spec.sampleSeed, part), weight: rms }], scale);
    const sample = field.sampler(at.xNm, pixel.xNm, cols);
    for (let i = 0; i < rows; i++) {
      sample(at.yNm + i * pixel.yNm, line);
      for (let j = 0; j < cols; j++) out[i * cols + j] += line[j];
    }
  }
  forPixelsNear(spec, at, particles, 0, (k, p, distanceNm) => {
    out[k] += bumpNm(p, distanceNm);
  });
  return out;
}

/** Calls `visit` for each pixel within a particle's extent. */
export function forPixelsNear(
  spec: CooldownSpec,
  at: Place,
  particles: readonly Particle[],
  blurNm: number,
  visit: (pixel: number, particle: Particle, distanceNm: number) => void,
): void {
  const { rows, cols, pixel } = spec;
  for (const p of particles) {
    const e = extentOf(p, blurNm);
    const i1 = Math.min(rows - 1, Math.floor((p.yNm + e - at.yNm) / pixel.yNm));
    const j1 = Math.min(cols - 1, Math.floor((p.xNm + e - at.xNm) / pixel.xNm));
    for (let i = Math.max(0, Math.ceil((p.yNm - e - at.yNm) / pixel.yNm)); i <= i1; i++)
      for (let j = Math.max(0, Math.ceil((p.xNm - e - at.xNm) / pixel.xNm)); j <= j1; j++)
        visit(i * cols + j, p, distanceToParticle(p, at.xNm + j * pixel.xNm, at.yNm + i * pixel.yNm));
  }
}

/** The rows of a frame that were not measured: blocks, from before to. */
function unmeasuredBlocks(spec: CooldownSpec, frame: number, random: Random): [number, number][] {
  const u = spec.unmeasured;
  if (u.list !== null) return u.list.filter((b) => b.frame === frame).map((b) => [b.fromRow, b.toRow]);
  if (random.uniform() >= u.chance) return [];
  const rows = 1 + random.below(Math.max(1, u.maxRows));
  const from = random.below(Math.max(1, spec.rows - rows + 1));
  return [[from, from + rows]];
}

/** Gain, line noise, noise, scars and unmeasured rows over what the tip saw. `gain` is the frame's own. */
export function record(
  spec: CooldownSpec,
  frame: number,
  gain: number,
  at: Place,
  seen: NearField,
  particles: readonly Particle[],
): Recorded {
  const { rows, cols, pixel, noise, topography: topo } = spec;
  const n = rows * cols;
  const random = makeRandom(childSeed(spec.seed, PART.frame, frame));
  const measured = new Uint8Array(n).fill(1);
  for (const [from, to] of unmeasuredBlocks(spec, frame, random)) measured.fill(0, from * cols, to * cols);
  const rowLogGain = rowValues(random, rows, spec.gain.rowSd, spec.gain.rowWalkSd);
  const rowPhase = rowValues(random, rows, spec.phaseOffset.rowSdRad, spec.phaseOffset.rowWalkSdRad);
  const phase0 = spec.phaseOffset.anyPhase ? 2 * Math.PI * random.uniform() : 0;
  const rowHeight = rowValues(random, rows, topo.rowSdNm, topo.rowWalkSdNm);
  const tiltX = (topo.tiltNmPerUm * (2 * random.uniform() - 1)) / 1000;
  const tiltY = (topo.tiltNmPerUm * (2 * random.uniform() - 1)) / 1000;
  const field = (sd: number): Float64Array | null =>
    sd === 0 ? null : noiseField(random, rows, cols, noise.correlationXPx, noise.correlationYPx);
  const nRe = field(noise.complex);
  const nIm = field(noise.complex);
  const nAmplitude = field(noise.amplitude);
  const nPhase = field(noise.phaseRad);
  const nHeight = field(topo.noiseNm);
  const height = sampleHeightNm(spec, at, particles);

  const topographyNm = new Float32Array(n);
  const amplitude = new Float32Array(n);
  const phaseRad = new Float32Array(n);
  for (let i = 0; i < rows; i++) {
    const g = gain * Math.exp(rowLogGain[i]);
    const c = g * Math.cos(phase0 + rowPhase[i]);
    const s = g * Math.sin(phase0 + rowPhase[i]);
    for (let j = 0; j < cols; j++) {
      const k = i * cols + j;
      const re = c * seen.re[k] - s * seen.im[k] + (nRe === null ? 0 : noise.complex * nRe[k]);
      const im = s * seen.re[k] + c * seen.im[k] + (nIm === null ? 0 : noise.complex * nIm[k]);
      amplitude[k] = Math.hypot(re, im) + (nAmplitude === null ? 0 : noise.amplitude * nAmplitude[k]);
      phaseRad[k] = wrap(Math.atan2(im, re) + (nPhase === null ? 0 : noise.phaseRad * nPhase[k]));
      topographyNm[k] =
        height[k] +
        tiltX * j * pixel.xNm +
        tiltY * i * pixel.yNm +
        rowHeight[i] +
        (nHeight === null ? 0 : topo.noiseNm * nHeight[k]);
    }
  }

  const scars = Math.floor(spec.scars.perFrame + random.uniform());
  for (let k = 0; k < scars; k++) {
    const row = random.below(rows);
    const col = random.below(cols);
    const length = 6 + random.below(Math.max(1, spec.scars.maxLengthPx - 5));
    const lift = (random.uniform() < 0.5 ? -1 : 1) * (3 + 12 * random.uniform());
    const factor = random.uniform() < 0.5 ? 0.5 + 0.2 * random.uniform() : 1.3 + 0.4 * random.uniform();
    const turn = 0.4 * (2 * random.uniform() - 1);
    for (let j = col; j < Math.min(cols, col + length); j++) {
      topographyNm[row * cols + j] += lift;
      amplitude[row * cols + j] *= factor;
      phaseRad[row * cols + j] = wrap(phaseRad[row * cols + j] + turn);
    }
  }
  for (let k = 0; k < n; k++) {
    if (measured[k] === 1) continue;
    topographyNm[k] = Number.NaN;
    amplitude[k] = Number.NaN;
    phaseRad[k] = Number.NaN;
  }
  return { topographyNm, amplitude, phaseRad, measured, scars };
}
