import type { FrameInfo, Notice } from "../../model/cooldown.js";
import type { Drift } from "../../model/signal.js";
import { closuresOf } from "./closures.js";
import { agreeingPairs, bridgesOf, type Claim } from "./consensus.js";
import { solvePairGraph } from "./pair_graph.js";
import { placeCovariance, type NoisyPair, type Window } from "./place_covariance.js";
import type { DriftSettings } from "./settings.js";
import type { MeasuredShift, PairShift } from "./types.js";

/** Frames that hold together among themselves but not with the first frame: places relative to the first of them. */
export interface LooseGroup {
  readonly frames: readonly number[];
  readonly xNm: readonly number[];
  readonly yNm: readonly number[];
}

export interface DriftSolution {
  /** One a frame, in order. */
  readonly drifts: readonly Drift[];
  readonly notices: readonly Notice[];
  /** Pairs whose peak was wrong: they disagree with all others by more than their errors allow. */
  readonly rejected: readonly (readonly [number, number])[];
  readonly groups: readonly LooseGroup[];
  /** Root mean square of the triangles' closure, nm an axis, and over what the pairs' standard deviations, taken as independent, predict. */
  readonly closureNm: number | null;
  readonly closureRatio: number | null;
  /** Standard deviation, nm an axis, that drift during the scans adds to each frame. */
  readonly frameTermNm: number;
}

/** A pair is never known better than this share of a pixel: the rest of interpolation and of sampling. */
const FLOOR_PX = 0.001;

/** Places of all frames from measured pairs, the first frame at (0, 0).
 *  Wrong peaks are found by agreement (`agreeingPairs`), the rest is solved with Huber's weights. `sdNm` is the root mean square of the
 *  two axes: errors that pairs share through a frame's noise are carried through (`placeCovariance`), triangles that close worse
 *  than predicted add a variance to every pair, drift during the scans (first rows against last ones) adds one to every frame.
 *  A frame that does not hang together with the first frame by pairs that agree has no numbers, and a notice.
 *  If the first frame itself hangs together with none, no other frame has a place in the cooldown's coordinates: said in one notice; their places
 *  relative to one another are in `groups`. */
export function solveDrift(frames: readonly FrameInfo[], pairs: readonly PairShift[], s: DriftSettings): DriftSolution {
  const n = frames.length;
  const measured = pairs.filter((p): p is MeasuredShift => p.status !== "failed");
  const claims = measured.map((p): Claim => {
    const least = Math.max(p.pixel.xNm, p.pixel.yNm);
    return {
      a: p.reference,
      b: p.moving,
      x: p.xNm,
      y: p.yNm,
      sure: p.status === "ok",
      // a few marks match at a wrong place now and then
      alone: p.channel === "topography" || p.features >= MANY_MARKS * s.leastFeatures,
      quality: 1 - p.ratio,
      tolerance: Math.max(s.grossPx * least, 6 * Math.sqrt(Math.max(p.xxNm2, p.yyNm2))),
    };
  });
  const { agrees, group } = agreeingPairs(n, claims, SEED);
  const good = measured.filter((_, k) => agrees[k]);
  const notices: Notice[] = [];
  const drifts: Drift[] = frames.map((_, frame) => ({ frame, xNm: null, yNm: null, sdNm: null }));
  drifts[0] = { frame: 0, xNm: 0, yNm: 0, sdNm: 0 };
  const groups: LooseGroup[] = [];
  const frameTerm = frameVariance(good);
  const closure = closureOf(good);
  const largest = Math.max(0, ...group);
  for (let g = 0; g <= largest; g++) {
    const members = frames.flatMap((_, i) => (group[i] === g ? [i] : []));
    if (members.length < 2) continue;
    const placed = place(members, good, closure.alone, s);
    if (placed === null) continue;
    if (g !== 0) {
      groups.push({ frames: members, xNm: placed.map((p) => p.x), yNm: placed.map((p) => p.y) });
      continue;
    }
    members.forEach((frame, k) => {
      if (k === 0) return;
      const { x, y, variance } = placed[k];
      drifts[frame] = { frame, xNm: x, yNm: y, sdNm: Math.sqrt(variance + 2 * frameTerm) };
    });
  }
  notices.push(...noticesOf(frames, measured, agrees, claims, drifts, groups));
  return {
    drifts,
    notices,
    rejected: measured.flatMap((p, k) => (agrees[k] ? [] : [[p.reference, p.moving] as const])),
    groups,
    closureNm: closure.rms,
    closureRatio: closure.ratio,
    frameTermNm: Math.sqrt(frameTerm),
  };
}

/** Without topography this many times the least number of features must make a shift that is to place a frame alone. */
const MANY_MARKS = 2;
/** The order in which spanning trees are drawn; any number does. */
const SEED = 71;

function place(
  members: readonly number[],
  pairs: readonly MeasuredShift[],
  alone: number,
  s: DriftSettings,
): { x: number; y: number; variance: number }[] | null {
  const index = new Map(members.map((frame, k) => [frame, k]));
  const own = pairs.flatMap((p): NoisyPair[] => {
    const a = index.get(p.reference);
    const b = index.get(p.moving);
    if (a === undefined || b === undefined) return [];
    const floor = (FLOOR_PX * Math.max(p.pixel.xNm, p.pixel.yNm)) ** 2;
    return [
      {
        a,
        b,
        x: p.xNm,
        y: p.yNm,
        covariance: { xx: p.xxNm2 + floor + alone, xy: p.xyNm2, yy: p.yyNm2 + floor + alone },
        alone: 0,
        framed: (p.framed * (p.xxNm2 + p.yyNm2)) / (p.xxNm2 + p.yyNm2 + 2 * (floor + alone)),
        ...windows(p),
      },
    ];
  });
  const solution = solvePairGraph(members.length, own, s.huber);
  if (solution === null) return null;
  const covariance = placeCovariance(members.length, own, solution.weights);
  if (covariance === null) return null;
  return members.map((_, k) => ({
    x: solution.places[2 * k],
    y: solution.places[2 * k + 1],
    variance: 0.5 * (covariance[3 * k] + covariance[3 * k + 2]),
  }));
}

/** The overlap of a pair in the coordinates of the reference and of the moving frame. */
function windows(p: MeasuredShift): { windowA: Window; windowB: Window } {
  const x0 = Math.max(0, p.xNm);
  const x1 = Math.min(p.widthNm, p.widthNm + p.xNm);
  const y0 = Math.max(0, p.yNm);
  const y1 = Math.min(p.heightNm, p.heightNm + p.yNm);
  return { windowA: [x0, x1, y0, y1], windowB: [x0 - p.xNm, x1 - p.xNm, y0 - p.yNm, y1 - p.yNm] };
}

/** What the triangles say of the pairs' errors. `alone`: variance (nm² an axis) missing in each pair's prediction. */
function closureOf(pairs: readonly MeasuredShift[]): { rms: number | null; ratio: number | null; alone: number } {
  const closures = closuresOf(pairs.map((p) => ({ a: p.reference, b: p.moving, x: p.xNm, y: p.yNm })));
  if (closures.length === 0) return { rms: null, ratio: null, alone: 0 };
  // per axis; the largest tenth is left out on both sides of the comparison: Huber's weights deal with those
  const squares = closures
    .map((c) => ({
      seen: 0.5 * (c.x * c.x + c.y * c.y),
      predicted: [c.ij, c.jk, c.ik].reduce((sum, k) => sum + 0.5 * (pairs[k].xxNm2 + pairs[k].yyNm2), 0),
    }))
    .sort((a, b) => a.seen / a.predicted - b.seen / b.predicted);
  const kept = squares.slice(0, Math.max(1, Math.ceil(0.9 * squares.length)));
  const seen = kept.reduce((sum, q) => sum + q.seen, 0) / kept.length;
  const predicted = kept.reduce((sum, q) => sum + q.predicted, 0) / kept.length;
  return {
    rms: Math.sqrt(squares.reduce((sum, q) => sum + q.seen, 0) / squares.length),
    ratio: Math.sqrt(seen / predicted),
    alone: Math.max(0, (seen - predicted) / 3),
  };
}

/** Variance (nm² an axis) of a frame's place from drift during the scan, over what noise makes of the slopes: a slope of s over the frame moves rows by s/√12. */
function frameVariance(pairs: readonly MeasuredShift[]): number {
  if (pairs.length < 4) return 0;
  const excess = pairs
    .map((p) => {
      const { xNm, yNm, sdXNm, sdYNm } = p.stretch;
      return 0.5 * (xNm * xNm - sdXNm * sdXNm + yNm * yNm - sdYNm * sdYNm);
    })
    .sort((a, b) => a - b);
  const kept = excess.slice(0, Math.ceil(0.9 * excess.length));
  const mean = kept.reduce((a, b) => a + b, 0) / kept.length;
  const sd = Math.sqrt(kept.reduce((a, b) => a + (b - mean) ** 2, 0) / kept.length / kept.length);
  // the slope between two frames holds both frames' drift
  return mean > 3 * sd ? mean / 2 / 12 : 0;
}

function noticesOf(
  frames: readonly FrameInfo[],
  measured: readonly MeasuredShift[],
  agrees: readonly boolean[],
  claims: readonly Claim[],
  drifts: readonly Drift[],
  groups: readonly LooseGroup[],
): Notice[] {
  const notices: Notice[] = [];
  const lost = drifts.filter((d) => d.xNm === null).map((d) => d.frame);
  if (frames.length > 1 && lost.length === frames.length - 1) {
    const together = groups.reduce((most, g) => Math.max(most, g.frames.length), 0);
    notices.push({
      frame: null,
      code: "drift-failed",
      message:
        `the first frame could not be linked to any other: no other frame has a position` +
        (together > 1 ? ` (${together} others do hold together; leave the first frame out to have them placed)` : ""),
    });
  } else {
    for (const frame of lost) {
      const group = groups.find((g) => g.frames.includes(frame));
      notices.push({
        frame,
        code: "drift-failed",
        message:
          group === undefined
            ? "could not be placed: no shift against another frame could be trusted"
            : `could not be placed: linked to ${group.frames.length - 1} other frame(s), but not to the first frame`,
      });
    }
  }
  const placed = (p: MeasuredShift): boolean => drifts[p.reference].xNm !== null && drifts[p.moving].xNm !== null;
  for (const k of bridgesOf(frames.length, claims, agrees)) {
    const p = measured[k];
    if (!placed(p)) continue;
    notices.push({
      frame: p.moving,
      code: "drift-unchecked",
      message: `placed by a single shift against frame ${p.reference}, which no other shift confirms`,
    });
  }
  const wrong = agrees.filter((a) => !a).length;
  if (wrong > 0) {
    notices.push({
      frame: null,
      code: "drift-pairs-rejected",
      message: `${wrong} of ${agrees.length} measured shifts disagree with all others and were left out`,
    });
  }
  const onAmplitude = measured.filter((p, k) => agrees[k] && p.channel === "amplitude").length;
  const onMarks = measured.filter((p, k) => agrees[k] && p.channel === "marks").length;
  if (onAmplitude + onMarks > 0) {
    notices.push({
      frame: null,
      code: "drift-on-amplitude",
      message:
        `no topography: ${onMarks} shifts were measured on marks in the amplitude away from walls, ${onAmplitude} on the amplitude itself, ` +
        `where moving domains pass for drift`,
    });
  }
  return notices;
}
