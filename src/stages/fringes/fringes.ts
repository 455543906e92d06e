import type { Tip } from "../../model/cooldown.js";
import type { FrameStates, Signal } from "../../model/signal.js";
import { FWHM_PER_SIGMA } from "../../model/units.js";
import type { FrameWalls, FringeTest } from "../../model/walls.js";
import { apparentWidth, kinkWidthFromApparent } from "../../numerics/kink.js";
import { median } from "../../numerics/quantile.js";
import { childSeed } from "../../numerics/random.js";
import { fringeTable, type FringeTable, type Blur, type Member } from "./basis.js";
import { acrossChord, chordOf, type Chord } from "./chord.js";
import { FringeFit } from "./estimate.js";
import { FringeForward } from "./forward.js";
import { levelScatter } from "./level_scatter.js";
import { measureNoise, type NoiseModel } from "./noise.js";
import type { Grid } from "./grid.js";
import { referenceRows } from "./reference_rows.js";
import { drawnFringe } from "./picture.js";
import { Profiler, type Profile } from "./profile.js";
import { SearchBasis } from "./search_basis.js";
import type { FringeSettings } from "./settings.js";
import { betweenWalls, cutStretches, type Stretch } from "./stretches.js";
import { supTest, type Candidate, type SupTest } from "./sup_test.js";

/** Ratio of neighbouring periods of the grid, and the decays tried with each, in periods. */
const PERIOD_RATIO = 1.25;
const DECAYS = [0.25, 0.5, 1, 2] as const;
/** A period can still be felt when this share of it lies within reach. */
const LEAST_SHARE = 0.5;
/** Rows are referenced on pixels farther from the walls than about this, in apparent widths. */
const NEAR_WIDTHS = 1.25;
/** Period and decay are fitted only where the test says there may be something. */
const FIT_BELOW_P = 0.05;
/** With a test below this there may be a fringe in the frame, or rows that look like one. */
const CLEAR_P = 0.01;
/** Rows off by more than this (1 sd, rad) were not referenced but led astray: no period or decay is told from them. */
const LARGEST_ROW_SD = 0.04;
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
  const shortest = Math.max(s.leastPeriodTips * (tip?.resolutionNm ?? 0), 4 * binNm);
  const table = fringeTable(membersFrom(shortest, s.reachNm / LEAST_SHARE), blur, s.reachNm);
  const grid = { across, distanceNm: cut.distanceNm, trusted: cut.trusted, rows, cols };
  const frame = { grid, chord, blur, nearNm, binNm, stretches: cut.stretches };
  const seen = profilesOf(frame, s);

  const bases = {
    metallic: new SearchBasis(table, true, chord),
    insulating: new SearchBasis(table, false, chord),
  };
  const testOf = ({ profiles, levelSdRad }: Profiles, k: number, ...again: number[]): SupTest | null => {
    const { wall, stretch } = cut.stretches[k];
    const candidates = candidatesFor(profiles[k], table, s);
    if (profiles[k].count < LEAST_BINS || candidates.length === 0) return null;
    const drawn = childSeed(seed, wall, stretch, ...again);
    return supTest(profiles[k], table, bases, chord, candidates, s.reachNm, levelSdRad, s.draws, drawn);
  };
  const found = cut.stretches.map((_, k) => testOf(seen, k));
  // A fringe is in the rows' own offsets: where there is one they are found anew, beside it.
  const clear = found.some((f) => f !== null && f.pValue < CLEAR_P);
  const rowsAgain = clear ? referenceRows(grid, seen.noise.local, binNm, s.reachNm) : null;
  let better = seen;
  if (rowsAgain !== null) {
    const between = betweenWalls(cut.distanceNm, rows, cols, pixel, tipSigma);
    const stretches = cut.stretches.map((t) => ({ ...t, pixels: t.pixels.filter((p) => between[p] === 0) }));
    better = profilesOf({ ...frame, grid: { ...grid, across: rowsAgain.across }, stretches }, s);
  }
  const rowsKnown = rowsAgain === null || rowsAgain.sdRad <= LARGEST_ROW_SD;
  const forward = {
    metallic: new FringeForward("metallic", chord, table.blur, s.reachNm),
    insulating: new FringeForward("insulating", chord, table.blur, s.reachNm),
  };
  return cut.stretches.flatMap((stretch, k): FringeTest[] => {
    const test = found[k];
    if (test === null) return [];
    const own = better.profiles[k];
    const enough = Math.min(own.reachMetallicNm, own.reachInsulatingNm) >= s.leastReachNm && own.count >= LEAST_BINS;
    // what was seen before the rows were put right, and is not seen any more, was theirs
    const second = rowsAgain !== null && rowsKnown && enough && test.pValue < FIT_BELOW_P ? testOf(better, k, 1) : null;
    const pValue = Math.max(test.pValue, second?.pValue ?? 0);
    const { best } = test;
    const profile = enough ? own : seen.profiles[k];
    const fit = new FringeFit(profile, table, forward[best.side], chord, best, s.reachNm);
    // Where there is a fringe the frame's own levels, averaged over pixels that carry it, are off by a share of it.
    const levelSdRad = Math.hypot(better.levelSdRad, LEVEL_SHARE * fit.roughContrastRad(better.levelSdRad));
    const { fitted, ...numbers } = fit.estimate(levelSdRad, pValue < FIT_BELOW_P, rowsKnown && enough, s);
    return [
      {
        frame: signal.frame,
        wall: stretch.wall,
        stretch: stretch.stretch,
        arcFromNm: stretch.arcFromNm,
        arcToNm: stretch.arcToNm,
        pValue,
        side: best.side,
        ...numbers,
        ...(fitted === undefined
          ? {}
          : {
              drawn: drawnFringe(signal, states.levels, stretch, cut.distanceNm, binNm, profile, chord, blur, fitted),
            }),
      },
    ];
  });
}

interface Frame {
  readonly grid: Grid;
  readonly chord: Chord;
  readonly blur: Blur;
  readonly nearNm: number;
  readonly binNm: number;
  readonly stretches: readonly Stretch[];
}

interface Profiles {
  readonly noise: NoiseModel;
  readonly profiles: readonly Profile[];
  readonly levelSdRad: number;
}

function profilesOf({ grid, chord, blur, nearNm, binNm, stretches }: Frame, s: FringeSettings): Profiles {
  const noise = measureNoise(grid, chord, blur, nearNm, binNm, s.reachNm);
  const profiler = new Profiler(grid, binNm, s.reachNm, nearNm, noise);
  const profiles = stretches.map((stretch) => profiler.profile(stretch));
  const levelSdRad = levelScatter(profiles, chord, nearNm, s.leastLevelSdRad, s.mostLevelSdRad);
  return { noise, profiles, levelSdRad };
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
