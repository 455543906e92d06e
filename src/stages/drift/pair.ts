import { coarsePeaks, type Peak } from "./coarse.js";
import { fineShift, type FineShift } from "./fine.js";
import { pyramidOf, type Pyramid } from "./pyramid.js";
import type { DriftSettings } from "./settings.js";
import type { DriftImage, FailedShift, MeasuredShift, PairShift } from "./types.js";

/** The coarse step works on images of about this side. */
const COARSE_SIDE = 128;
/** Fewer pixels than this in the overlap say nothing. */
const LEAST_PIXELS = 200;
/** Steps shrink tenfold and more each time: after one of this length what is left is below 1e-4 px. */
const TOLERANCE_PX = 5e-4;
/** Peaks down to this share of `leastPeak` are kept as ambiguous. */
const DOUBTFUL = 0.8;
/** White noise blurred by σ is correlated as exp(−x²/4σ²): nothing is left at five. Noise correlated before the blur has room as well. */
const NOISE_REACH = 6;

type Attempt = Omit<MeasuredShift, "reference" | "moving"> | FailedShift["reason"];

/** Shift of `moving` against `reference`.
 *  Coarse: masked normalised cross-correlation over every shift up to `largestJump`, whatever is predicted; then Gauss–Newton on the
 *  overlap, both frames blurred alike, with the gain and every row's offset free.
 *  @param predicted position of `moving` minus that of `reference` as known from elsewhere; only chooses between peaks
 *  that are alike (the status says `ambiguous` all the same)
 *  @returns `failed` with the reason where no peak stands out of the correlation, or the fine step does not settle
 *  Accuracy and its limits: tests/stages/drift. Fails on strictly periodic structure, where any period fits as well (`ambiguous`). */
export function measurePair(
  reference: DriftImage,
  moving: DriftImage,
  predicted: { readonly xNm: number; readonly yNm: number } | null,
  s: DriftSettings,
): PairShift {
  const names = { reference: reference.frame, moving: moving.frame };
  let answer: Attempt;
  if (reference.marks !== null && moving.marks !== null) {
    const blurNm = Math.max(reference.marks.blurNm, moving.marks.blurNm);
    answer = attempt(reference, moving, reference.marks, moving.marks, blurNm, predicted, "marks", s);
    if (typeof answer === "string") {
      const wide = Math.max(reference.blurNm, moving.blurNm);
      answer = attempt(reference, moving, reference, moving, wide, predicted, "amplitude", s);
    }
  } else if (reference.channel !== moving.channel) {
    answer = "no-structure";
  } else {
    const blurNm = Math.max(reference.blurNm, moving.blurNm);
    answer = attempt(reference, moving, reference, moving, blurNm, predicted, reference.channel, s);
  }
  return typeof answer === "string" ? { ...names, status: "failed", reason: answer } : { ...names, ...answer };
}

interface Image {
  readonly values: Float32Array;
  readonly usable: Uint8Array;
}

function attempt(
  reference: DriftImage,
  moving: DriftImage,
  imageR: Image,
  imageM: Image,
  blurNm: number,
  predicted: { readonly xNm: number; readonly yNm: number } | null,
  channel: MeasuredShift["channel"],
  s: DriftSettings,
): Attempt {
  const { pixel } = reference;
  const sigmaX = Math.max(s.leastBlurPx, blurNm / pixel.xNm);
  const sigmaY = Math.max(s.leastBlurPx, blurNm / pixel.yNm);
  const r = pyramidOf(imageR, reference.rows, reference.cols, sigmaX, sigmaY);
  const m = pyramidOf(imageM, moving.rows, moving.cols, sigmaX, sigmaY);
  const smaller = Math.min(r.whole, m.whole);
  const least = Math.max(LEAST_PIXELS, s.leastOverlap * smaller);

  const side = Math.max(reference.rows, reference.cols, moving.rows, moving.cols);
  let found: { peaks: Peak[]; factor: number } | null = null;
  for (let factor = Math.max(1, Math.round(side / COARSE_SIDE)); ; factor = Math.floor(factor / 2)) {
    const peaks = coarsePeaks(r.coarse(factor), m.coarse(factor), s);
    if (peaks.length > 0 && peaks[0].height >= DOUBTFUL * s.leastPeak) found = { peaks, factor };
    // fine structure drowns when pixels are put together: once more with smaller blocks
    if (found !== null || factor === 1) break;
  }
  if (found === null) return "no-peak";
  const { peaks, factor } = found;
  const ratio = peaks.length > 1 ? peaks[1].height / peaks[0].height : 0;
  const ambiguous = ratio > s.peakRatio || peaks[0].height < s.leastPeak;
  const peak = ambiguous ? nearestTo(predicted, peaks, factor, pixel, s) : peaks[0];

  const reachPx = { x: Math.ceil(NOISE_REACH * sigmaX), y: Math.ceil(NOISE_REACH * sigmaY) };
  const fine = refine(r, m, peak, factor, least, reachPx);
  if (fine === null) return "not-converged";
  const overlap = fine.pixels / smaller;
  return {
    status: ambiguous ? "ambiguous" : "ok",
    xNm: -fine.dx * pixel.xNm,
    yNm: -fine.dy * pixel.yNm,
    xxNm2: fine.covariance.xx * pixel.xNm * pixel.xNm,
    xyNm2: fine.covariance.xy * pixel.xNm * pixel.yNm,
    yyNm2: fine.covariance.yy * pixel.yNm * pixel.yNm,
    stretch: {
      xNm: -fine.slope.x * pixel.xNm,
      yNm: -fine.slope.y * pixel.yNm,
      sdXNm: fine.slope.sdX * pixel.xNm,
      sdYNm: fine.slope.sdY * pixel.yNm,
    },
    overlap,
    peak: peaks[0].height,
    ratio,
    framed: fine.framed,
    correlation: fine.correlation,
    channel,
    pixel,
    widthNm: moving.cols * pixel.xNm,
    heightNm: moving.rows * pixel.yNm,
  };
}

/** Among peaks nearly as high as the highest, the one nearest to what is predicted. */
function nearestTo(
  predicted: { readonly xNm: number; readonly yNm: number } | null,
  peaks: readonly Peak[],
  factor: number,
  pixel: { readonly xNm: number; readonly yNm: number },
  s: DriftSettings,
): Peak {
  if (predicted === null) return peaks[0];
  const away = (p: Peak): number =>
    Math.hypot(-p.lagX * factor * pixel.xNm - predicted.xNm, -p.lagY * factor * pixel.yNm - predicted.yNm);
  return peaks
    .filter((p) => p.height > s.peakRatio * peaks[0].height)
    .reduce((best, p) => (away(p) < away(best) ? p : best));
}

/** From whole pixels of the coarse grid to the full one: first on the coarse grid itself, whose basin is wider. */
function refine(
  r: Pyramid,
  m: Pyramid,
  peak: Peak,
  factor: number,
  leastPixels: number,
  reachPx: { readonly x: number; readonly y: number },
): FineShift | null {
  let dx = peak.lagX * factor;
  let dy = peak.lagY * factor;
  if (factor > 1 || peak.widthPx > 3) {
    const start = { dx: peak.lagX, dy: peak.lagY };
    const rough = fineShift(r.sloped(factor), m.sloped(factor), start, {
      leashPx: 1 + peak.widthPx,
      tolerancePx: 0.01,
      leastPixels: Math.max(50, leastPixels / (2 * factor * factor)),
      reachPx: null,
    });
    if (rough !== null) {
      dx = rough.dx * factor;
      dy = rough.dy * factor;
    }
  }
  return fineShift(
    r.sloped(1),
    m.sloped(1),
    { dx, dy },
    { leashPx: factor + 1, tolerancePx: TOLERANCE_PX, leastPixels, reachPx },
  );
}
