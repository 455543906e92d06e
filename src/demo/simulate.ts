import type { Branch, RawFrame } from "../model/cooldown.js";
import { makeRaster, type Raster } from "../model/raster.js";
import { FWHM_PER_SIGMA } from "../model/units.js";
import { childSeed, makeRandom } from "../numerics/random.js";
import { particlesIn } from "./debris.js";
import { countDomains } from "./domain_count.js";
import { PART } from "./domain_field.js";
import { fringeSeen } from "./fringe_seen.js";
import { halfTemperatures } from "./half_temperature.js";
import { forPixelsNear, record } from "./instrument.js";
import type { LevelSet } from "./level_set.js";
import { areaOf, nearField, type Place } from "./near_field.js";
import type { CooldownSpec } from "./spec.js";
import type { CycleTruth, FrameTruth } from "./truth.js";
import { levelsAt, widthAt } from "./wall_profile.js";

/** Where one frame of a simulated cooldown stands: known without rendering it. */
export interface FramePlan {
  readonly frame: number;
  readonly series: number;
  readonly branch: Branch;
  readonly cycle: number;
  readonly temperatureK: number;
  readonly driftXNm: number;
  readonly driftYNm: number;
  readonly gain: number;
}

/** The truth of one frame with its maps, row-major [rows, cols]. */
export interface SimulatedTruth extends FrameTruth {
  /** Signed distance of each pixel's centre from the nearest wall, metallic positive, nm, of all pixels; ±∞ without a wall in reach. */
  readonly signedDistanceNm: Float32Array;
  /** 1 metallic, 0 insulating, of all pixels. */
  readonly states: Uint8Array;
  /** 1 where measured; 1 where a particle is seen (its radius and one tip resolution around it). */
  readonly measured: Uint8Array;
  readonly debris: Uint8Array;
}

/** One simulated frame; passes for a `RawFrame`. */
export interface SimulatedFrame extends RawFrame {
  readonly branch: Branch;
  readonly cycle: number;
  readonly temperatureK: number;
  readonly topography: Raster;
  readonly amplitude: Raster;
  readonly phase: Raster;
  readonly truth: SimulatedTruth;
}

export interface SimulatedCooldown {
  readonly spec: CooldownSpec;
  /** Least area of a domain that `truth` counts: a disc of the tip's resolution, at least one pixel. */
  readonly leastAreaNm2: number;
  readonly plan: readonly FramePlan[];
  /** Renders frame k; always the same, whatever was rendered before. */
  frame(k: number): SimulatedFrame;
  /** Half temperatures of every cycle for this field of view; renders nothing. */
  cycles(): CycleTruth[];
}

/** Folds a position back into ±limit. */
function fold(v: number, limit: number): number {
  if (!(limit > 0)) return 0;
  const period = 4 * limit;
  const u = (((v + limit) % period) + period) % period;
  return u <= 2 * limit ? u - limit : 3 * limit - u;
}

function planFrames(spec: CooldownSpec): FramePlan[] {
  const plan: FramePlan[] = [];
  const walk = makeRandom(childSeed(spec.seed, PART.drift));
  const gains = makeRandom(childSeed(spec.seed, PART.gain));
  const d = spec.drift;
  let cycle = 0;
  let x = 0;
  let y = 0;
  spec.series.forEach(({ branch, temperaturesK }, series) => {
    if (branch === "cooling" || series === 0 || spec.series[series - 1].branch === "warming") cycle++;
    for (const temperatureK of temperaturesK) {
      const frame = plan.length;
      if (frame > 0) {
        x += d.stepSdNm * walk.normal();
        y += d.stepSdNm * walk.normal();
        if (walk.uniform() < d.jumpChance) {
          const angle = 2 * Math.PI * walk.uniform();
          x += d.jumpNm * Math.cos(angle);
          y += d.jumpNm * Math.sin(angle);
        }
      }
      const listed = d.listNm === null ? [fold(x, d.limitNm), fold(y, d.limitNm)] : d.listNm[frame];
      if (listed === undefined) throw new RangeError(`drift.listNm has no entry for frame ${frame}`);
      if (frame === 0 && (listed[0] !== 0 || listed[1] !== 0))
        throw new RangeError("the first frame's drift must be 0");
      const logGain = spec.gain.frameSd * gains.normal();
      plan.push({
        frame,
        series,
        branch,
        cycle,
        temperatureK,
        driftXNm: listed[0],
        driftYNm: listed[1],
        gain: frame === 0 ? 1 : Math.exp(logGain),
      });
    }
  });
  return plan;
}

/** Length of the walls' pieces whose middle lies between pixel centres, where the nearest pixel is allowed. */
function lengthInside(walls: LevelSet, spec: CooldownSpec, at: Place, allowed: (pixel: number) => boolean): number {
  const { rows, cols, pixel } = spec;
  let sum = 0;
  for (let p = 0; p < walls.count; p++) {
    const x1 = walls.pieces[4 * p];
    const y1 = walls.pieces[4 * p + 1];
    const x2 = walls.pieces[4 * p + 2];
    const y2 = walls.pieces[4 * p + 3];
    const col = (0.5 * (x1 + x2) - at.xNm) / pixel.xNm;
    const row = (0.5 * (y1 + y2) - at.yNm) / pixel.yNm;
    if (col < 0 || row < 0 || col > cols - 1 || row > rows - 1) continue;
    if (allowed(Math.round(row) * cols + Math.round(col))) sum += Math.hypot(x2 - x1, y2 - y1);
  }
  return sum;
}

/** A cooldown of an invented film, frame by frame, with its truth.
 *
 *  Domains are the level set of a random field in closed form; a wall's profile is ½(1 + tanh(d/w)) in the signed distance d from it; the
 *  complex near-field signal mixes in that share, carries the fringe's phase, and is blurred by the tip at each frame's exact place
 *  on the sample; then come gain, line noise, noise, scars and unmeasured rows. Throws RangeError on a spec that does not fit itself. */
export function simulateCooldown(spec: CooldownSpec): SimulatedCooldown {
  const plan = planFrames(spec);
  const area = spec.pixel.xNm * spec.pixel.yNm;
  const leastAreaNm2 = Math.max(area, Math.PI * (spec.tip.resolutionNm / 2) ** 2);
  const place = (p: FramePlan): Place => ({ xNm: spec.origin.xNm + p.driftXNm, yNm: spec.origin.yNm + p.driftYNm });
  return {
    spec,
    leastAreaNm2,
    plan,
    cycles: () => halfTemperatures(spec, plan),
    frame(k) {
      const p = plan[k];
      if (p === undefined) throw new RangeError(`no frame ${k}: the cooldown has ${plan.length}`);
      const { rows, cols, pixel } = spec;
      const at = place(p);
      const particles = particlesIn(spec, areaOf(spec, at));
      const seen = nearField(spec, p.branch, p.cycle, p.temperatureK, at, particles);
      const got = record(spec, k, p.gain, at, seen, particles);
      const debris = new Uint8Array(rows * cols);
      forPixelsNear(spec, at, particles, spec.tip.resolutionNm / FWHM_PER_SIGMA, (pixelIndex, particle, distanceNm) => {
        if (distanceNm < particle.radiusNm + spec.tip.resolutionNm) debris[pixelIndex] = 1;
      });
      let counted = 0;
      let metallic = 0;
      let clean = 0;
      let cleanMetallic = 0;
      for (let i = 0; i < seen.states.length; i++) {
        if (got.measured[i] === 0) continue;
        counted++;
        metallic += seen.states[i];
        if (debris[i] === 1) continue;
        clean++;
        cleanMetallic += seen.states[i];
      }
      const leastPx = leastAreaNm2 / area;
      return {
        frame: k,
        branch: p.branch,
        cycle: p.cycle,
        temperatureK: p.temperatureK,
        topography: makeRaster(got.topographyNm, rows, cols, pixel),
        amplitude: makeRaster(got.amplitude, rows, cols, pixel),
        phase: makeRaster(got.phaseRad, rows, cols, pixel),
        truth: {
          frame: k,
          branch: p.branch,
          cycle: p.cycle,
          temperatureK: p.temperatureK,
          driftXNm: p.driftXNm,
          driftYNm: p.driftYNm,
          gain: p.gain,
          metallicFraction: metallic / counted,
          metallicFractionClean: cleanMetallic / clean,
          singleState: metallic === counted ? "metallic" : metallic === 0 ? "insulating" : null,
          widthNm: widthAt(spec, p.temperatureK),
          wallLengthNm: lengthInside(seen.walls, spec, at, (q) => got.measured[q] === 1),
          wallLengthCleanNm: lengthInside(seen.walls, spec, at, (q) => got.measured[q] === 1 && debris[q] === 0),
          levels: levelsAt(spec, p.temperatureK),
          fringe: fringeSeen(spec, p.temperatureK),
          metallicDomains: countDomains(seen.states, got.measured, rows, cols, 1, 8, leastPx),
          insulatingDomains: countDomains(seen.states, got.measured, rows, cols, 0, 4, leastPx),
          scars: got.scars,
          unmeasuredPixels: rows * cols - counted,
          signedDistanceNm: seen.signedDistanceNm,
          states: seen.states,
          measured: got.measured,
          debris,
        },
      };
    },
  };
}
