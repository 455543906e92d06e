import type { Tip } from "../../model/cooldown.js";
import type { FrameStates, Signal } from "../../model/signal.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import type { FrameWalls, FringeTest } from "../../model/walls.js";
import { apparentWidth, kinkWidthFromApparent } from "../../numerics/kink.js";
import { median } from "../../numerics/quantile.js";
import { childSeed } from "../../numerics/random.js";
import { fringeTable, type FringeTable, type Blur, type Member } from "./basis.js";
import { acrossChord, chordOf } from "./chord.js";
import { estimateFringe, type FringeEstimate } from "./estimate.js";
import { levelScatter } from "./level_scatter.js";
import { measureNoise } from "./noise.js";
import { drawnFringe } from "./picture.js";
import { Profiler, type Profile } from "./profile.js";
import type { FringeSettings } from "./settings.js";
import { cutStretches } from "./stretches.js";
import { supTest, type Candidate } from "./sup_test.js";

/** Ratio of neighbouring periods of the grid, and the decays tried with each, in periods. */
const PERIOD_RATIO = 1.25;
const DECAYS = [0.25, 0.5, 1, 2] as const;
/** A period can still be felt when this share of it lies within reach. */
const LEAST_SHARE = 0.5;
/** Rows are referenced on pixels farther from the walls than about this, in apparent widths. */
const NEAR_WIDTHS = 1.25;
/** Period and decay are fitted only where the test says there may be something. */
const FIT_BELOW_P = 0.05;
/** Share of a fringe's contrast by which a level of the frame may be off. */
const LEVEL_SHARE = 0.3;
/** A stretch with fewer bins is not tested. */
const LEAST_BINS = 12;

/** Tests every wall of one frame, in stretches, for a fringe of the optical phase beside it.
 *
 *  Looks at the component of the complex signal across the line between the two states' levels. Every blurred mixture of the two states
 *  lies on that line, whatever the wall's shape, width or neighbours, so the null needs no model of the wall; a turn φ of the
 *  phase moves the signal off it by φ times its component along it. Frames without an optical phase, with one state or without walls have no test.
 *  Lengths in nm of the frame. Results do not depend on the order of frames: random numbers come from `seed`, the wall and the stretch. */
export function testFringes(
  signal: Signal,
  states: FrameStates,
  walls: FrameWalls,
  tip: Tip | null,
  s: FringeSettings,
  seed: number,
): FringeTest[] {
  if (signal.im === null || states.levels.verdict !== "mixed" || walls.walls.length === 0) return [];
  const chord = chordOf(states.levels);
  if (chord === null) return [];
  const { rows, cols, pixel } = signal;
  const tipSigma = tip === null ? 0 : tip.resolutionNm / FWHM_PER_SIGMA;
  const binNm = s.binNm > 0 ? s.binNm : Math.max(Math.min(pixel.xNm, pixel.yNm), tipSigma / 2);
  const blur = blurOf(walls, tipSigma, binNm);
  const across = acrossChord(signal.re, signal.im, signal.usable, chord);
  const cut = cutStretches(walls.walls, signal.usable, rows, cols, pixel, s);
  const nearNm = NEAR_WIDTHS * apparentWidth(blur.wNm, Math.max(blur.sigmaNm, 1e-3));
  const grid = { across, distanceNm: cut.distanceNm, trusted: cut.trusted, rows, cols };
  const noise = measureNoise(grid, chord, blur, nearNm, binNm, s.reachNm);
  const profiler = new Profiler(grid, binNm, s.reachNm, nearNm, noise);
  const shortest = Math.max(s.leastPeriodTips * (tip?.resolutionNm ?? 0), 4 * binNm);
  const table = fringeTable(membersFrom(shortest, s.reachNm / LEAST_SHARE), blur, s.reachNm);

  const profiles = cut.stretches.map((stretch) => profiler.profile(stretch));
  const levelSdRad = levelScatter(profiles, chord, nearNm, s.leastLevelSdRad, s.mostLevelSdRad);

  const tests: FringeTest[] = [];
  cut.stretches.forEach((stretch, k) => {
    const profile = profiles[k];
    const candidates = candidatesFor(profile, table, s);
    if (profile.count < LEAST_BINS || candidates.length === 0) return;
    const drawn = childSeed(seed, stretch.wall, stretch.stretch);
    const found = supTest(profile, table, chord, candidates, s.reachNm, levelSdRad, s.draws, drawn);
    if (found === null) return;
    const free = found.pValue < FIT_BELOW_P;
    const estimate = (sd: number, withPeriod: boolean): FringeEstimate =>
      estimateFringe(profile, table, chord, found.best, s.reachNm, sd, withPeriod, s);
    // Where there is a fringe the frame's own levels, averaged over pixels that carry it, are off by a share of it.
    const rough = estimate(levelSdRad, false).contrastRad ?? 0;
    const { fitted, ...numbers } = estimate(Math.hypot(levelSdRad, LEVEL_SHARE * rough), free);
    tests.push({
      frame: signal.frame,
      wall: stretch.wall,
      stretch: stretch.stretch,
      arcFromNm: stretch.arcFromNm,
      arcToNm: stretch.arcToNm,
      pValue: found.pValue,
      side: found.best.side,
      ...numbers,
      ...(fitted === undefined
        ? {}
        : { drawn: drawnFringe(signal, states.levels, stretch, cut.distanceNm, binNm, profile, chord, blur, fitted) }),
    });
  });
  return tests;
}

/** Blur and wall width of the frame, the width from the fitted profiles. */
function blurOf(walls: FrameWalls, tipSigma: number, binNm: number): Blur {
  const sigmaNm = Math.hypot(tipSigma, binNm / Math.sqrt(12));
  const widths = (sound: boolean): number[] =>
    walls.profiles.flatMap((p) => (p.apparentWidthNm !== null && (!sound || p.flag === "") ? [p.apparentWidthNm] : []));
  const sound = widths(true);
  const all = sound.length > 0 ? sound : widths(false);
  if (all.length === 0) return { wNm: sigmaNm, sigmaNm };
  const w = kinkWidthFromApparent(median(Float64Array.from(all)), tipSigma);
  return { wNm: Number.isFinite(w) ? w : 0, sigmaNm };
}

function membersFrom(shortestNm: number, longestNm: number): Member[] {
  const members: Member[] = [];
  for (let periodNm = shortestNm; periodNm <= longestNm; periodNm *= PERIOD_RATIO) {
    for (const share of DECAYS) members.push({ periodNm, decayNm: share * periodNm });
  }
  return members;
}

function candidatesFor(profile: Profile, table: FringeTable, s: FringeSettings): Candidate[] {
  const out: Candidate[] = [];
  if (Math.min(profile.reachMetallicNm, profile.reachInsulatingNm) < s.leastReachNm) return out;
  for (const side of ["metallic", "insulating"] as const) {
    const reach = side === "metallic" ? profile.reachMetallicNm : profile.reachInsulatingNm;
    table.members.forEach((m, member) => {
      if (m.periodNm * LEAST_SHARE <= reach) out.push({ side, member });
    });
  }
  return out;
}
