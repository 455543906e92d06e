import { stationaryCovariance } from "./noise_covariance.js";
import { larger, scoreCovariance, type Sym2 } from "./score_covariance.js";
import { PairSums, type Slope } from "./pair_sums.js";
import { offsetFor, sampleShifted, type Shifted, type Sloped } from "./shifted.js";

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
/** Gradients are sampled anew where the shift has moved farther than this. */
const GRADIENT_REACH_PX = 0.15;
/** Rounding and interpolation: no shift is known better, not even between two copies of one frame. */
const LEAST_SD_PX = 1e-4;

/** Shift between two equally blurred frames to a small fraction of a pixel.
 *
 *  Solves Σ w G (M(x + d) − b R(x) − nuisance) = 0 for d, where G is the gradient of R: one gain b is free and so is the nuisance, an offset
 *  for each row, tilt and bow (`removeNuisance`). As G and the noise of M are independent and the
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
  const { rows, cols } = reference.grid;
  const work = new PairSums(reference.grid, reference.gradient);
  let at = offsetFor(start.dx, start.dy, null);
  let gradients: { mx: Shifted; my: Shifted; slope: Slope; dx: number; dy: number } | null = null;
  let pixels = 0;
  let iteration = 0;
  let step = Number.POSITIVE_INFINITY;
  for (; iteration < ITERATIONS && step > options.tolerancePx; iteration++) {
    pixels = work.residuals(sampleShifted(moving.grid, rows, cols, at), at);
    if (pixels < options.leastPixels) return null;
    // gradients change little over a fraction of a pixel
    if (gradients === null || Math.hypot(at.dx - gradients.dx, at.dy - gradients.dy) > GRADIENT_REACH_PX) {
      const mx = sampleShifted(moving.gradientX, rows, cols, at);
      const my = sampleShifted(moving.gradientY, rows, cols, at);
      work.levelGradient();
      gradients = { mx, my, slope: work.slope(mx, my, false), dx: at.dx, dy: at.dy };
    }
    const score = work.score();
    const delta = solve(gradients.slope, score.x, score.y);
    if (delta === null) return null;
    const length = Math.hypot(delta.x, delta.y);
    const shorter = length > 1 ? 1 / length : 1;
    at = offsetFor(at.dx - shorter * delta.x, at.dy - shorter * delta.y, at);
    if (!(Math.hypot(at.dx - start.dx, at.dy - start.dy) <= options.leashPx)) return null;
    step = length;
  }
  if (gradients === null || step > options.tolerancePx) return null;

  // the sums stand where the last, short step began
  const { mx, my } = gradients;
  work.levelGradient();
  const a = work.slope(mx, my, true);
  work.score();
  const scatter = scoreCovariance(work.blocks.x, work.blocks.y, work.blocks.rows, work.blocks.cols, null);
  const reach = options.reachPx;
  const alike = reach === null ? null : stationaryCovariance(work.parts(), reach.x, reach.y);
  const covariance = alike === null ? scatter : larger(alike, scatter, pixels / 64);
  const level = work.alongRows(mx, my);
  const tilted = scoreCovariance(work.blocks.x, work.blocks.y, work.blocks.rows, work.blocks.cols, level.weights);
  const mean = sandwich(a, covariance);
  const tilt = sandwich(level.slope, tilted);
  const tiltBy = solve(level.slope, level.score.x, level.score.y);
  if (mean === null || tilt === null || tiltBy === null) return null;
  return {
    dx: at.dx,
    dy: at.dy,
    covariance: mean,
    framed: work.framed(a),
    slope: { x: -tiltBy.x, y: -tiltBy.y, sdX: Math.sqrt(tilt.xx), sdY: Math.sqrt(tilt.yy) },
    correlation: work.correlation,
    features: work.features,
    pixels,
    iterations: iteration,
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
