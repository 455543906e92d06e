import { childSeed, makeRandom } from "../numerics/random.js";
import { PART } from "./domain_field.js";
import type { CooldownSpec, Particle } from "./spec.js";

/** A rectangle of the sample, nm. */
export interface Area {
  readonly xFromNm: number;
  readonly xToNm: number;
  readonly yFromNm: number;
  readonly yToNm: number;
}

const TILE_NM = 1000;

/** The particles that lie in an area of the sample. They are drawn tile by tile from the sample's seed, so every frame and every
 *  cooldown of the sample meets the same ones. */
export function particlesIn(spec: CooldownSpec, area: Area): Particle[] {
  if (spec.debris.list !== null) return [...spec.debris.list];
  const out: Particle[] = [];
  if (spec.debris.perUm2 <= 0) return out;
  const margin = 200;
  const tile = (v: number): number => Math.floor(v / TILE_NM);
  for (let ty = tile(area.yFromNm - margin); ty <= tile(area.yToNm + margin); ty++) {
    for (let tx = tile(area.xFromNm - margin); tx <= tile(area.xToNm + margin); tx++) {
      const random = makeRandom(childSeed(spec.sampleSeed, PART.debris, ty, tx));
      const count = Math.floor(spec.debris.perUm2 * (TILE_NM / 1000) ** 2 + random.uniform());
      for (let k = 0; k < count; k++) {
        const rod = random.uniform() < 0.25;
        const dark = random.uniform() < 0.6;
        out.push({
          xNm: (tx + random.uniform()) * TILE_NM,
          yNm: (ty + random.uniform()) * TILE_NM,
          radiusNm: rod ? 12 + 10 * random.uniform() : 12 + 30 * random.uniform() ** 2,
          lengthNm: rod ? 60 + 140 * random.uniform() : 0,
          angleDeg: 180 * random.uniform(),
          heightNm: 8 + 35 * random.uniform() ** 2,
          amplitudeFactor: dark ? 0.25 + 0.45 * random.uniform() : 1.3 + 0.7 * random.uniform(),
          phaseShiftRad: 0.5 * (2 * random.uniform() - 1),
        });
      }
    }
  }
  return out;
}

/** Distance from a point to a particle's middle line (a point for a dot), nm. */
export function distanceToParticle(p: Particle, xNm: number, yNm: number): number {
  const a = (p.angleDeg * Math.PI) / 180;
  const ux = Math.cos(a);
  const uy = -Math.sin(a);
  const rx = xNm - p.xNm;
  const ry = yNm - p.yNm;
  const along = Math.max(-p.lengthNm / 2, Math.min(p.lengthNm / 2, rx * ux + ry * uy));
  return Math.hypot(rx - along * ux, ry - along * uy);
}

/** Height of a particle as the topography shows it: half of `heightNm` at `radiusNm` from its middle line. */
export const bumpNm = (p: Particle, distanceNm: number): number =>
  p.heightNm * Math.exp(-Math.LN2 * (distanceNm / p.radiusNm) ** 2);

/** Largest distance from a particle's centre at which anything of it is seen, `blurNm` being the tip's standard deviation. */
export const extentOf = (p: Particle, blurNm: number): number => p.lengthNm / 2 + 3.5 * p.radiusNm + 6 * blurNm;

/** Lays the particles over one row of the complex signal before the blur: inside its radius a particle multiplies the signal
 *  by its factor and turns its phase; the edge is `edgeNm` soft so that it can be summed on the grid. */
export function coverRow(
  particles: readonly Particle[],
  yNm: number,
  x0Nm: number,
  stepNm: number,
  n: number,
  edgeNm: number,
  re: Float64Array,
  im: Float64Array,
): void {
  const soft = Math.max(edgeNm, 0.1);
  for (const p of particles) {
    const reach = p.lengthNm / 2 + p.radiusNm + 6 * soft;
    if (Math.abs(yNm - p.yNm) > reach) continue;
    const from = Math.max(0, Math.ceil((p.xNm - reach - x0Nm) / stepNm));
    const to = Math.min(n - 1, Math.floor((p.xNm + reach - x0Nm) / stepNm));
    for (let k = from; k <= to; k++) {
      const m = 0.5 * (1 - Math.tanh((distanceToParticle(p, x0Nm + k * stepNm, yNm) - p.radiusNm) / soft));
      if (m < 1e-5) continue;
      const gain = 1 + (p.amplitudeFactor - 1) * m;
      const c = gain * Math.cos(p.phaseShiftRad * m);
      const s = gain * Math.sin(p.phaseShiftRad * m);
      const r = re[k];
      re[k] = r * c - im[k] * s;
      im[k] = r * s + im[k] * c;
    }
  }
}
