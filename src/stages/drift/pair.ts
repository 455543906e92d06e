import { coarsePeaks, type Peak } from "./coarse.js";
import { fineShift, type FineShift } from "./fine.js";
import type { PixelSize } from "../../model/raster.js";
import { pyramidOf, type Pyramid } from "./pyramid.js";
import type { DriftSettings } from "./settings.js";
import type { DriftImage, MeasuredShift, PairShift } from "./types.js";

/** The coarse step works on images of about this side. */
const COARSE_SIDE = 128;
/** Fewer pixels than this in the overlap say nothing. */
const LEAST_PIXELS = 200;
/** Steps shrink tenfold and more each time: after one of this length what is left is below 1e-4 px. */
const TOLERANCE_PX = 5e-4;
/** On the coarser grids, whose answer is only where the next one starts. */
const ROUGH_PX = 0.03;
/** A shift less certain than this is none. */
const WORST_SD_PX = 1;
/** Without topography one less certain than this is none to go by alone; and none is on the amplitude itself, whose domains move. */
const SURE_SD_PX = 0.5;
/** Peaks down to this share of `leastPeak` are kept as ambiguous. */
const DOUBTFUL = 0.8;
/** White noise blurred by σ is correlated as exp(−x²/4σ²): nothing is left at five. Noise correlated before the blur has room as well. */
const NOISE_REACH = 6;

/** Shift of `moving` against `reference`.
 *  Coarse: masked normalised cross-correlation over every shift up to `largestJump`, whatever is predicted; then Gauss–Newton on the
 *  overlap, both frames blurred alike, with the gain, every row's offset, tilt and bow free. Without topography the coarse step adds up what the amplitude and
 *  the marks in it say, and the fine step uses the marks; only where they do not hold a shift, the amplitude itself (`channel` tells).
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
  if (reference.channel !== moving.channel) return { ...names, status: "failed", reason: "no-structure" };
  const whole = channelOf(reference.channel, reference, moving, reference, moving, s);
  const marks =
    reference.marks === null || moving.marks === null
      ? null
      : channelOf("marks", reference.marks, moving.marks, reference, moving, s);
  const channels = marks === null ? [whole] : [marks, whole];
  const found = findPeak(channels, s) ?? (marks === null ? null : findPeak([whole], s));
  if (found === null) return { ...names, status: "failed", reason: "no-peak" };

  const { peaks, factor } = found;
  const { pixel } = reference;
  const ratio = peaks.length > 1 ? peaks[1].height / peaks[0].height : 0;
  const doubtful = ratio > s.peakRatio || peaks[0].height < s.leastPeak;
  const peak = ratio > s.peakRatio ? nearestTo(predicted, peaks, factor, pixel, s) : peaks[0];
  for (const channel of channels) {
    const smaller = Math.min(channel.r.whole, channel.m.whole);
    const least = Math.max(LEAST_PIXELS, s.leastOverlap * smaller);
    const fine = refine(channel, peak, factor, least);
    if (fine === null || Math.max(fine.covariance.xx, fine.covariance.yy) > WORST_SD_PX ** 2) continue;
    const sd = Math.sqrt(Math.max(fine.covariance.xx, fine.covariance.yy));
    const sure = channel.name === "topography" || (channel.name === "marks" && sd <= SURE_SD_PX);
    return {
      ...names,
      status: doubtful || !sure || fine.features < s.leastFeatures ? "ambiguous" : "ok",
      ...inNm(fine, pixel),
      overlap: fine.pixels / smaller,
      peak: peaks[0].height,
      ratio,
      framed: fine.framed,
      correlation: fine.correlation,
      features: fine.features,
      channel: channel.name,
      pixel,
      widthNm: moving.cols * pixel.xNm,
      heightNm: moving.rows * pixel.yNm,
    };
  }
  return { ...names, status: "failed", reason: "not-converged" };
}

interface Image {
  readonly values: Float32Array;
  readonly usable: Uint8Array;
  readonly blurNm: number;
}

/** The same channel of both frames, blurred alike. */
interface Channel {
  readonly name: MeasuredShift["channel"];
  readonly r: Pyramid;
  readonly m: Pyramid;
}

function channelOf(
  name: MeasuredShift["channel"],
  imageR: Image,
  imageM: Image,
  reference: DriftImage,
  moving: DriftImage,
  s: DriftSettings,
): Channel {
  const { pixel } = reference;
  const blurNm = Math.max(imageR.blurNm, imageM.blurNm);
  const sigmaX = Math.max(s.leastBlurPx, blurNm / pixel.xNm);
  const sigmaY = Math.max(s.leastBlurPx, blurNm / pixel.yNm);
  return {
    name,
    r: pyramidOf(imageR, reference.rows, reference.cols, sigmaX, sigmaY),
    m: pyramidOf(imageM, moving.rows, moving.cols, sigmaX, sigmaY),
  };
}

function findPeak(channels: readonly Channel[], s: DriftSettings): { peaks: Peak[]; factor: number } | null {
  const { r, m } = channels[0];
  const side = Math.max(r.grid.rows, r.grid.cols, m.grid.rows, m.grid.cols);
  for (let factor = Math.max(1, Math.round(side / COARSE_SIDE)); factor >= 1; factor = Math.floor(factor / 2)) {
    const peaks = coarsePeaks(
      channels.map((c) => [c.r.coarse(factor), c.m.coarse(factor)] as const),
      s,
    );
    // fine structure drowns when pixels are put together: once more with smaller blocks
    if (peaks.length > 0 && peaks[0].height >= DOUBTFUL * s.leastPeak) return { peaks, factor };
  }
  return null;
}

type Lengths = Pick<MeasuredShift, "xNm" | "yNm" | "xxNm2" | "xyNm2" | "yyNm2" | "stretch">;

/** A feature that moved by +d in the image gives its frame a drift of −d. */
function inNm(fine: FineShift, pixel: PixelSize): Lengths {
  return {
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
  };
}

/** Among peaks nearly as high as the highest, the one nearest to what is predicted. */
function nearestTo(
  predicted: { readonly xNm: number; readonly yNm: number } | null,
  peaks: readonly Peak[],
  factor: number,
  pixel: PixelSize,
  s: DriftSettings,
): Peak {
  if (predicted === null) return peaks[0];
  const away = (p: Peak): number =>
    Math.hypot(-p.lagX * factor * pixel.xNm - predicted.xNm, -p.lagY * factor * pixel.yNm - predicted.yNm);
  return peaks
    .filter((p) => p.height > s.peakRatio * peaks[0].height)
    .reduce((best, p) => (away(p) < away(best) ? p : best));
}

/** From whole pixels of the coarse grid to the full one, over the grids between: a coarse grid's basin is wider, and what is found there spares
 *  steps on the full one. */
function refine({ r, m }: Channel, peak: Peak, factor: number, leastPixels: number): FineShift | null {
  let dx = peak.lagX * factor;
  let dy = peak.lagY * factor;
  let leash = 1 + peak.widthPx;
  const grids: number[] = [];
  for (let f = factor; f > 1; f = Math.floor(f / 2)) grids.push(f);
  if (grids.length === 0 && peak.widthPx > 3) grids.push(1);
  for (const f of grids) {
    const rough = fineShift(
      r.sloped(f),
      m.sloped(f),
      { dx: dx / f, dy: dy / f },
      {
        leashPx: leash,
        tolerancePx: ROUGH_PX,
        leastPixels: Math.max(50, leastPixels / (2 * f * f)),
        reachPx: null,
      },
    );
    if (rough === null) continue;
    dx = rough.dx * f;
    dy = rough.dy * f;
    // on the next grid twice as many pixels
    leash = 3;
  }
  return fineShift(
    r.sloped(1),
    m.sloped(1),
    { dx, dy },
    {
      leashPx: factor + 1,
      tolerancePx: TOLERANCE_PX,
      leastPixels,
      reachPx: { x: Math.ceil(NOISE_REACH * r.sigmaXPx), y: Math.ceil(NOISE_REACH * r.sigmaYPx) },
    },
  );
}
