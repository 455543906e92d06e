import type { Tip } from "../../model/cooldown.js";
import type { ProfileBins } from "../../model/pictures.js";
import type { FrameStates, Signal } from "../../model/signal.js";
import { median } from "../../numerics/quantile.js";
import { FWHM_PER_SIGMA, RISE_PER_SIGMA, RISE_PER_W } from "../../model/units.js";
import type { FrameWalls, Wall, WallProfile } from "../../model/walls.js";
import { CorrelatedNoise, measureLags, powersOf } from "./correlation.js";
import { Projector, type Direction } from "./direction.js";
import { estimateWithTip, estimateWithoutTip, type ProfileEstimate } from "./estimate.js";
import { flagOf, type Surroundings } from "./flags.js";
import { fringeAlarms, type PhaseTurn } from "./fringe_alarm.js";
import { freeReach, nearestOf, type NearestWall, type Segments } from "../../raster/nearest_wall.js";
import { drawnProfile } from "./picture.js";
import { ProfileData } from "./profile_data.js";
import { PARAMETERS, ProfileFitter, type SigmaPrior } from "./profile_fit.js";
import type { WallsSettings } from "./settings.js";
import { Stretches, type Stretch } from "./stretches.js";
import { trace } from "./trace.js";
import { distanceFromEdge, usableForFits } from "./usable.js";

/** Traces the walls of one frame and fits a profile to every stretch of them.
 *
 *  Each measured pixel belongs to the nearest point of the nearest wall (exact distances in nm, nothing resampled) and enters one
 *  profile at most. Left out: pixels nearer to another wall or within the tip's reach of the line between two walls, pixels
 *  around the open ends of walls, unusable ones. The profile I + (M − I)·u(d − c − tilt·arc; w², σ) is fitted to the raw values along
 *  one direction of the complex signal (see `Direction`), weighted by the measured noise of the two states.
 *
 *  @param tip null: only apparent widths; the upper limit is then that of the apparent width, which the intrinsic one cannot exceed
 *  Accuracy: tests/stages/walls/*.test.ts. Method: slanted-edge sampling as in ISO 12233; profile likelihood for limits. */
export function fitWalls(signal: Signal, states: FrameStates, tip: Tip | null, s: WallsSettings): FrameWalls {
  const traced = trace(states, tip, s);
  const { walls } = traced;
  const wallLengthNm = walls.reduce((sum, w) => sum + w.lengthNm, 0);
  if (walls.length === 0) return { frame: signal.frame, walls, profiles: [], wallLengthNm: 0 };
  const fit = new FrameFit(signal, states, tip, s, traced.slopePerNm, traced.blurNm, walls);
  fit.prepare(traced.patches);
  const profiles = fit.profiles();
  return { frame: signal.frame, walls, profiles, wallLengthNm, bins: fit.bins };
}

/** So many profiles on either side of one tell how wide its wall is. */
const NEIGHBOURS = 3;

/** A profile may be so many times as wide as the frame's walls together. */
const WIDEST = 4;

/** A stretch with what its pixels say. */
interface Fitted {
  readonly stretch: Stretch;
  readonly direction: Direction;
  readonly estimate: ProfileEstimate | null;
  /** Distance of each of its pixels from the fitted middle of the wall, nm. */
  readonly offCentreNm: Float64Array | Float32Array;
}

class FrameFit {
  private readonly segments: Segments;
  private readonly near: NearestWall;
  private readonly projector: Projector;
  private noise: CorrelatedNoise;
  private readonly data = new ProfileData();
  private readonly fitter = new ProfileFitter();
  private readonly sigmaNm: number;
  private readonly spacingNm: number;
  private readonly stepNm: number;
  /** Width of the frame's walls taken together, as seen; and its two parts. */
  private apparentNm: number;
  private pooledW = 0;
  private pooledSigma: number;
  private directions: Direction[] = [];
  private turns: (PhaseTurn | null)[] = [];
  /** Distance of each pixel from the edge of the measured field, nm. */
  private readonly edgeNm: Float32Array;
  private stretches!: Stretches;
  /** Filled by `profiles`. */
  readonly bins: ProfileBins[] = [];

  constructor(
    private readonly signal: Signal,
    private readonly states: FrameStates,
    private readonly tip: Tip | null,
    private readonly s: WallsSettings,
    slopePerNm: number,
    blurNm: number,
    private readonly walls: readonly Wall[],
  ) {
    const { rows, cols, pixel } = signal;
    this.stepNm = Math.min(pixel.xNm, pixel.yNm);
    this.sigmaNm = tip === null ? 0 : tip.resolutionNm / FWHM_PER_SIGMA;
    this.edgeNm = distanceFromEdge(signal);
    ({ segments: this.segments, near: this.near } = nearestOf(walls, rows, cols, pixel));
    this.projector = new Projector(signal, states.levels, this.sigmaNm);
    this.spacingNm = s.spacingNm > 0 ? s.spacingNm : tip === null ? 6 * this.stepNm : 2 * tip.resolutionNm;
    // 10–90 from the slope at the middle (1.02 for a blurred step, 1.10 for a tanh), without the blur of the tracing
    const seen = 1.06 / slopePerNm;
    const least = Math.max(RISE_PER_SIGMA * this.sigmaNm, 2 * this.stepNm);
    this.apparentNm = Math.max(least, Math.sqrt(Math.max(0, seen * seen - (RISE_PER_SIGMA * blurNm) ** 2)));
    this.noise = this.correlatedNoise();
    this.pooledSigma = tip === null ? this.apparentNm / RISE_PER_SIGMA : this.sigmaNm;
  }

  /** Noise correlation from pixels well away from every wall; where they are few, from what came with the levels. */
  private correlatedNoise(): CorrelatedNoise {
    const { signal, near, projector, states } = this;
    const { rows, cols, usable } = signal;
    const deviation = new Float32Array(rows * cols).fill(Number.NaN);
    const clear = 1.5 * this.apparentNm;
    for (let p = 0; p < deviation.length; p++) {
      const d = near.distanceNm[p];
      if (usable[p] === 0 || !(Math.abs(d) > clear)) continue;
      deviation[p] = projector.plateauNoise(p, d >= 0);
    }
    const { noiseCorrelationX, noiseCorrelationY } = states.levels;
    return new CorrelatedNoise(
      measureLags(deviation, rows, cols, "x") ?? powersOf(noiseCorrelationX),
      measureLags(deviation, rows, cols, "y") ?? powersOf(noiseCorrelationY),
      rows,
      cols,
      states.rowGainSd ?? null,
    );
  }

  /** Which pixels belong to which stretch, the width of all walls together, and the direction for each wall. */
  prepare(patches: Uint8Array): void {
    const { signal, s, near, segments } = this;
    const { rows, cols, pixel } = signal;
    const mostNm = Math.hypot(rows * pixel.yNm, cols * pixel.xNm);
    const free = freeReach(segments, near, rows, cols, pixel, mostNm);
    const usable = usableForFits(signal, this.states.map, patches, this.sigmaNm + this.apparentNm / 4);
    this.stretches = new Stretches(this.walls, segments, near, free, usable, this.spacingNm);
    this.pool();
    this.directions = this.walls.map(() => (this.projector.hasPhase ? "chord" : "amplitude"));
    if (this.projector.hasPhase) {
      this.turns = fringeAlarms(this.projector, this.stretches, near, this.noise, {
        reachNm: this.reachFor(this.apparentNm),
        farthestNm: this.reachFor(WIDEST * this.apparentNm),
        marginNm: this.marginNm(),
        binNm: Math.max(this.stepNm, this.sigmaNm),
        w: this.pooledW,
        sigma: this.pooledSigma,
        level: s.fringeAlarm,
        walls: this.walls.length,
      });
      for (let k = 0; k < this.walls.length; k++) if (this.turns[k] !== null) this.directions[k] = "radial";
    }
  }

  /** One profile for the whole frame, on a thinned set of pixels: it only steers starts, reach and weights. */
  private pool(): void {
    const { fitter, data, stretches } = this;
    const most = 20000;
    for (let round = 0; round < 2; round++) {
      const reach = this.reachFor(this.apparentNm);
      const thin = Math.max(1, Math.ceil(stretches.pixelCount / most));
      data.count = 0;
      data.reserve(Math.ceil(stretches.pixelCount / thin) + stretches.list.length);
      const direction = this.projector.hasPhase ? "chord" : "amplitude";
      for (const t of stretches.list) this.append(t, reach, direction, thin);
      if (data.count < 12) return;
      const start = this.projector.startLevels(direction);
      fitter.scale = 1;
      fitter.p.set([start.insulating, start.metallic, 0, 0, this.startWidthSquared(), this.pooledSigma]);
      const free = [true, true, true, false, this.tip !== null, this.tip === null];
      if (fitter.fit(data, free, null) === "singular") return;
      this.pooledW = Math.sqrt(fitter.p[4]);
      this.pooledSigma = fitter.p[5];
      const seen = Math.hypot(RISE_PER_SIGMA * this.pooledSigma, RISE_PER_W * this.pooledW);
      if (Math.abs(seen / this.apparentNm - 1) < 0.1) {
        this.apparentNm = seen;
        return;
      }
      this.apparentNm = seen;
    }
  }

  private startWidthSquared(): number {
    if (this.tip === null) return 0;
    const excess = this.apparentNm ** 2 - (RISE_PER_SIGMA * this.sigmaNm) ** 2;
    return Math.max(excess, (0.3 * RISE_PER_W * this.sigmaNm) ** 2) / RISE_PER_W ** 2;
  }

  private reachFor(apparentNm: number): number {
    return this.s.reachNm > 0 ? this.s.reachNm : this.s.reachWidths * apparentNm;
  }

  /** Distance from the line between two walls within which the tip still mixes in the other side. */
  private marginNm(): number {
    return Math.max(this.stepNm / 2, 1.5 * this.sigmaNm);
  }

  /** Pixels of one stretch within reach into the data. */
  private append(t: Stretch, reachNm: number, direction: Direction, thin: number): void {
    const { data, near, stretches, projector } = this;
    const margin = this.marginNm();
    const seen = this.apparentNm;
    const turn = direction === "radial" ? this.turns[t.wall] : null;
    for (let m = t.from; m < t.to; m += thin) {
      const pixel = stretches.pixels[m];
      const d = near.distanceNm[pixel];
      const off = Math.abs(d);
      if (off > reachNm || off > stretches.freeNm[m] - margin) continue;
      // a wall just outside the field could be nearer than this one, and still be felt
      if (this.edgeNm[pixel] < 0.5 * Math.min(off, seen)) continue;
      const k = data.count++;
      data.distance[k] = d;
      data.arc[k] = near.arcNm[pixel] - t.middleNm;
      data.pixel[k] = pixel;
      projector.put(
        data,
        k,
        pixel,
        d,
        this.pooledW,
        this.pooledSigma,
        direction,
        turn?.at(d) ?? 0,
        turn?.slope(d) ?? 0,
      );
    }
  }

  profiles(): WallProfile[] {
    const fitted = this.stretches.list.map((t) => this.fitted(t));
    return fitted.map((f, k) => this.record(f, this.apparentBeside(fitted, k)));
  }

  /** Width as seen of the profiles next to this one on its wall, without its own: what a profile is refused for must not depend on
   *  which way its own noise has fallen, or those that are kept come out too narrow. Where a wall has no neighbours, the frame's. */
  private apparentBeside(fitted: readonly Fitted[], k: number): number {
    const beside: number[] = [];
    const { wall } = fitted[k].stretch;
    for (let m = Math.max(0, k - NEIGHBOURS); m <= Math.min(fitted.length - 1, k + NEIGHBOURS); m++) {
      const { stretch, estimate } = fitted[m];
      if (m !== k && stretch.wall === wall && estimate?.converged === true) beside.push(estimate.apparentNm);
    }
    if (beside.length < NEIGHBOURS) return this.apparentNm;
    // a fit whose plateaux are out of reach comes out too narrow; the frame's width stands in for it
    return Math.min(WIDEST, Math.max(0.7, median(beside) / this.apparentNm)) * this.apparentNm;
  }

  private fitted(t: Stretch): Fitted {
    const { data, projector, s } = this;
    const direction = this.directions[t.wall];
    const levels = projector.startLevels(direction);
    let reach = this.reachFor(this.apparentNm);
    let estimate: ProfileEstimate | null = null;
    for (let round = 0; round < 3; round++) {
      data.count = 0;
      data.reserve(t.to - t.from);
      this.append(t, reach, direction, 1);
      if (data.count < Math.max(8, s.leastPixels / 3)) break;
      estimate = this.estimate(levels);
      if (estimate === null) break;
      if (round === 0 && this.dropOutliers()) estimate = this.estimate(levels) ?? estimate;
      // wide walls need their plateaux, and narrow ones no far-away pixels
      const wanted = this.reachFor(
        Math.min(WIDEST * this.apparentNm, Math.max(this.apparentNm / WIDEST, estimate.apparentNm)),
      );
      if (s.reachNm > 0 || Math.abs(wanted / reach - 1) < 0.2) break;
      reach = wanted;
    }
    if (estimate !== null)
      this.bins.push({
        wall: t.wall,
        profile: t.profile,
        ...estimate.shape,
        bins: drawnProfile(data, estimate, this.noise, this.stepNm),
      });
    const centre = estimate?.centreNm ?? 0;
    return { stretch: t, direction, estimate, offCentreNm: data.distance.slice(0, data.count).map((d) => d - centre) };
  }

  private estimate(levels: { insulating: number; metallic: number }): ProfileEstimate | null {
    const { data, fitter, noise, tip } = this;
    fitter.p.set([levels.insulating, levels.metallic, 0, 0, this.pooledW * this.pooledW, this.sigmaNm]);
    if (tip === null) return estimateWithoutTip(data, fitter, noise, this.apparentNm);
    const prior: SigmaPrior = { sigmaNm: this.sigmaNm, sdNm: tip.resolutionSdNm / FWHM_PER_SIGMA };
    const q = Math.max(this.pooledW * this.pooledW, 0.09 * this.sigmaNm * this.sigmaNm);
    return estimateWithTip(data, fitter, noise, prior, q);
  }

  /** Takes out single pixels far off the fitted profile (specks that no mask has caught). True where there were any. */
  private dropOutliers(): boolean {
    const { data, fitter } = this;
    const row = new Float64Array(PARAMETERS);
    let spread = 0;
    for (let k = 0; k < data.count; k++) spread += fitter.residual(data, fitter.p, k, row) ** 2;
    const limit = 5 * Math.max(1, Math.sqrt(spread / data.count));
    const keep = new Uint8Array(data.count);
    let dropped = 0;
    for (let k = 0; k < data.count; k++) {
      if (Math.abs(fitter.residual(data, fitter.p, k, row)) <= limit) keep[k] = 1;
      else dropped++;
    }
    if (dropped === 0) return false;
    data.compact(keep);
    return true;
  }

  private record(fitted: Fitted, apparentNm: number): WallProfile {
    const { projector } = this;
    const { stretch: t, direction, estimate: e, offCentreNm } = fitted;
    const at = t.middle;
    const centre = e === null || !(Math.abs(e.centreNm) < 2 * this.apparentNm) ? 0 : e.centreNm;
    const around: Surroundings = {
      apparentNm,
      freeInsulatingNm: t.freeInsulatingNm,
      freeMetallicNm: t.freeMetallicNm,
      curvaturePerNm: t.curvaturePerNm,
      contrast: Math.abs(projector.startLevels(direction).metallic - projector.startLevels(direction).insulating),
      frameLevels: projector.startLevels(direction),
    };
    const flag = flagOf(offCentreNm, e, around, this.s);
    const resolved = e !== null && e.resolved && e.widthSdNm !== null;
    // the metallic side as the fit has turned it: the wall's line is distance = centre + tilt·arc
    const tilt = e === null || !(Math.abs(e.tilt) < 1) ? 0 : e.tilt;
    const nx = at.nx - tilt * -at.ny;
    const ny = at.ny - tilt * at.nx;
    return {
      wall: t.wall,
      profile: t.profile,
      xNm: at.x + centre * at.nx,
      yNm: at.y + centre * at.ny,
      normalDeg: (Math.atan2(-ny, nx) * 180) / Math.PI,
      arcNm: t.middleNm,
      stretchNm: t.lengthNm,
      widthNm: e !== null && resolved ? e.bestWidthNm : null,
      widthSdNm: e !== null && resolved ? e.widthSdNm : null,
      widthSdTipNm: e !== null && resolved ? e.widthSdTipNm : null,
      widthUpper95Nm: e === null ? null : e.upper95Nm,
      detectionLimitNm: e === null ? null : e.detectionNm,
      resolved,
      apparentWidthNm: e === null ? null : e.apparentNm,
      apparentWidthSdNm: e === null ? null : e.apparentSdNm,
      amplitudeInsulating: e === null ? null : projector.amplitude(direction, "insulating", e.insulating),
      amplitudeMetallic: e === null ? null : projector.amplitude(direction, "metallic", e.metallic),
      reducedChi2: e === null ? null : e.reducedChi2,
      pixels: offCentreNm.length,
      flag,
    };
  }
}
