import { stationaryCovariance, windowOf } from "./noise_covariance.js";
import { larger, scoreCovariance, type Sym2 } from "./score_covariance.js";
import { PairSums } from "./pair_sums.js";
import { offsetFor, type Sloped } from "./shifted.js";
import { BLOCK, type Slope } from "./slope_sums.js";

export interface FineShift {
  /** The feature at (row, col) of the reference lies at (row + dy, col + dx) of the moving frame; pixels. */
  readonly dx: number;
  readonly dy: number;
  /** Covariance of (dx, dy), px². */
  readonly covariance: Sym2;
  /** Share of the covariance that comes of either frame's noise on the other's structure, the rest of noise on noise. */
  readonly framed: number;
  /** Shift at the reference's last row minus that at its first, with standard deviations; pixels. */
  readonly slope: { readonly x: number; readonly y: number; readonly sdX: number; readonly sdY: number };
  /** Correlation of the two over the overlap, row offsets off. */
  readonly correlation: number;
  /** Number of places that make this correlation. */
  readonly features: number;
  /** Pixels that entered. */
  readonly pixels: number;
  readonly iterations: number;
}

export interface FineOptions {
  /** A shift that walks farther than this from its start has left the peak; pixels. */
  readonly leashPx: number;
  /** Stop when a step is shorter; pixels. */
  readonly tolerancePx: number;
  readonly leastPixels: number;
  /** Noise is correlated over less than this, pixels; null: a rough covariance will do. */
  readonly reachPx: { readonly x: number; readonly y: number } | null;
}

const ITERATIONS = 25;
/** The derivative of the weighted residuals is a slope to go by where it has this share of the weights' own: near the answer, where few lie beyond the weights' bend. */
const LEAST_EXACT = 0.6;
/** A step back over this share of the last one is not taken whole. */
const OVERSHOT = 0.2;
/** A step leaves a few hundredths of itself: one shorter than this many standard deviations leaves about a tenth of one, … */
const ENOUGH_SDS = 4;
/** … and of few blocks one shorter than this times the root of their number, or what it mends would pass for scatter; … */
const ENOUGH_OF_BLOCKS = 0.07;
/** … where that is told from noise: what the step takes off the squares of the residuals must be little of them; … */
const MISFIT_SHARE = 0.1;
/** … and where the step is short against the interpolation's and the weights' bend; pixels. */
const LONGEST_LAST_PX = 0.02;
/** Rounding and interpolation: no shift is known better, not even between two copies of one frame. */
const LEAST_SD_PX = 1e-4;

/** Shift between two equally blurred frames to a small fraction of a pixel.
 *
 *  Solves Σ w G (M(x + d) − b R(x) − nuisance) = 0 for d, where G is the gradient of R: one gain b is free and so is the nuisance, an offset
 *  for each row, tilt and bow (`RowFit`). As G and the noise of M are independent and the
 *  noise of R is uncorrelated with its own gradient, the solution is not drawn towards half pixels by the noise that
 *  interpolation averages, as the minimum of the squared difference is. For the same reason the slope of the equation is taken from the
 *  gradients of both frames, Σ G ∂Mᵀ: the product of one gradient with itself is inflated by noise.
 *  Weights are Tukey's. The covariance has the correlation of the residuals in it, that which the blur makes and that which the instrument
 *  made before (`stationaryCovariance`), and is raised where the sums scatter more from block to block (`scoreCovariance`).
 *  @returns null where the equation cannot be solved or the shift runs away
 *  Source: inverse compositional Gauss–Newton, Baker & Matthews 2004, Int. J. Comput. Vis. 56, 221; gain and offset as in
 *  Evangelidis & Psarakis 2008, IEEE Trans. Pattern Anal. Mach. Intell. 30, 1858; weights Beaton & Tukey 1974, Technometrics 16, 147. */
export function fineShift(
  reference: Sloped,
  moving: Sloped,
  start: { readonly dx: number; readonly dy: number },
  options: FineOptions,
): FineShift | null {
  const work = new PairSums(reference, moving);
  const { sums } = work;
  let at = offsetFor(start.dx, start.dy, null);
  let pixels = 0;
  let taken: { x: number; y: number } | null = null;
  for (let iteration = 1; iteration <= ITERATIONS; iteration++) {
    pixels = work.read(at);
    if (pixels < options.leastPixels) return null;
    const score = sums.score();
    const byWeight = sums.slope(false);
    const exact = sums.slope(true);
    const delta = solve(
      exact.xx + exact.yy > LEAST_EXACT * (byWeight.xx + byWeight.yy) ? exact : byWeight,
      score.x,
      score.y,
    );
    if (delta === null) return null;
    const length = Math.hypot(delta.x, delta.y);
    // where the step goes back on the last one the weights make it jump over the answer: as much of it as the secant says
    const back =
      taken === null ? 0 : -(delta.x * taken.x + delta.y * taken.y) / (taken.x * taken.x + taken.y * taken.y);
    const shorter = Math.min(1, 1 / length, back > OVERSHOT ? 1 / (1 + back) : 1);
    taken = { x: shorter * delta.x, y: shorter * delta.y };
    at = offsetFor(at.dx - taken.x, at.dy - taken.y, at);
    if (!(Math.hypot(at.dx - start.dx, at.dy - start.dy) <= options.leashPx)) return null;
    const scatter = scoreCovariance(sums.blocks.x, sums.blocks.y, sums.blocks.rows, sums.blocks.cols, null);
    const rough = sandwich(exact, scatter);
    const misfit = Math.abs(delta.x * score.x + delta.y * score.y);
    const enough = Math.min(ENOUGH_SDS, (ENOUGH_OF_BLOCKS * Math.sqrt(pixels)) / BLOCK);
    const noisy = rough !== null && misfit < MISFIT_SHARE * sums.squares;
    const known = noisy ? Math.min(LONGEST_LAST_PX, enough * Math.sqrt(0.5 * (rough.xx + rough.yy))) : 0;
    if (length > Math.max(options.tolerancePx, known)) continue;
    // the sums stand where the last, short step began
    return answer(work, exact, scatter, at, pixels, iteration, options);
  }
  return null;
}

function answer(
  work: PairSums,
  exact: Slope,
  scatter: Sym2,
  at: { readonly dx: number; readonly dy: number },
  pixels: number,
  iterations: number,
  options: FineOptions,
): FineShift | null {
  const { sums } = work;
  const reach = options.reachPx;
  const alike =
    reach === null ? null : stationaryCovariance(work.parts(windowOf(work.overlap)), sums.plain, reach.x, reach.y);
  const covariance = alike === null ? scatter : larger(alike, scatter, pixels / 64);
  const level = sums.alongRows();
  const { blocks } = sums;
  const tilted = scoreCovariance(blocks.x, blocks.y, blocks.rows, blocks.cols, level.weights);
  const mean = sandwich(exact, covariance);
  const tilt = sandwich(level.slope, tilted);
  const tiltBy = solve(level.slope, level.score.x, level.score.y);
  if (mean === null || tilt === null || tiltBy === null) return null;
  return {
    dx: at.dx,
    dy: at.dy,
    covariance: mean,
    framed: work.framed(exact),
    slope: { x: -tiltBy.x, y: -tiltBy.y, sdX: Math.sqrt(tilt.xx), sdY: Math.sqrt(tilt.yy) },
    correlation: work.correlation,
    features: work.features,
    pixels,
    iterations,
  };
}

function solve(a: Slope, x: number, y: number): { x: number; y: number } | null {
  const det = a.xx * a.yy - a.xy * a.yx;
  if (!(a.xx > 0 && a.yy > 0 && det > 1e-4 * a.xx * a.yy)) return null;
  return { x: (a.yy * x - a.xy * y) / det, y: (a.xx * y - a.yx * x) / det };
}

/** A⁻¹ S A⁻ᵀ. */
function sandwich(a: Slope, s: Sym2): Sym2 | null {
  const u = solve(a, s.xx, s.xy);
  const v = solve(a, s.xy, s.yy);
  if (u === null || v === null) return null;
  const p = solve(a, u.x, v.x);
  const q = solve(a, u.y, v.y);
  if (p === null || q === null || !(p.x >= 0 && q.y >= 0)) return null;
  return { xx: p.x + LEAST_SD_PX ** 2, xy: 0.5 * (p.y + q.x), yy: q.y + LEAST_SD_PX ** 2 };
}
