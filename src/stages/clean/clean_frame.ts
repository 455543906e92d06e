import type { FrameNoise } from "../../model/analysis.js";
import { CHANNELS, type Notice, type RawFrame } from "../../model/cooldown.js";
import { type Raster, colsOf, dataOf, makeRaster, rowsOf } from "../../model/raster.js";
import type { CleanFrame } from "../../model/signal.js";
import { endsOf } from "../../raster/ends.js";
import { alignGains, alignHeights, alignPhases } from "./align_rows.js";
import { levelSurface } from "./level.js";
import { clippedShare, measureNoise, scaledBy, type NoiseByLevel } from "./noise.js";
import type { RowLinks } from "./row_links.js";
import type { RowOffsets } from "./row_model.js";
import { type Scars, findScars } from "./scars.js";
import type { CleanSettings } from "./settings.js";
import { turnToMean, wrapAll } from "./turn.js";
import { leaveOutWild } from "./wild.js";

/** What cleaning found in one frame. Plain data; null where the channel is missing. */
export interface CleanReport {
  readonly frame: number;
  /** Pixels set to not measured because they lie in scars, over all channels (amplitude and phase count once). */
  readonly scarPixels: number;
  readonly scarRuns: number;
  /** Share of the amplitude's pixels that were not measured to begin with. */
  readonly unmeasuredShare: number;
  /** Rows without a single measured pixel of the amplitude. */
  readonly unmeasuredRows: number;
  /** Share of the amplitude's pixels piled up at its highest or lowest value. */
  readonly clippedShare: number;
  /** Scatter of the rows before the correction, independent from row to row: relative gain, rad, nm. */
  readonly rowGainSd: number;
  readonly rowPhaseSdRad: number | null;
  readonly topographyRowSdNm: number | null;
  /** Standard deviation of the optical phase's walk, a row's step. */
  readonly rowPhaseStepSdRad: number | null;
  readonly noise: FrameNoise;
  readonly notices: readonly Notice[];
}

/** Cleans one frame: topography levelled and its rows aligned, amplitude rows scaled to one gain (ratios only, so never below
 *  zero by correction), phase rows referenced to each other as angles and the whole turned to circular mean 0, scars taken out.
 *
 *  Pixels that were not measured stay NaN; scars become NaN in their channel, and in amplitude and phase together, as these are one
 *  signal. Slow gain drift along a frame is left in the amplitude: without knowing the states it cannot be told from domains.
 *  Works with any channel but the amplitude missing, with missing rows, and with frames of one row (nothing to align). */
export function cleanFrame(raw: RawFrame, s: CleanSettings): { clean: CleanFrame; report: CleanReport } {
  const rows = rowsOf(raw.amplitude);
  const cols = colsOf(raw.amplitude);
  const notices: Notice[] = [];
  const notice = (code: string, message: string, varies: readonly string[] = []): void =>
    void notices.push({ frame: raw.frame, code, message, varies });

  /** A copy of a channel without what cannot be a measured value, which is said. */
  const sane = (raster: Raster, channel: "amplitude" | "topography"): Float32Array => {
    const values = finiteCopy(raster);
    const { pixels, farthest } = leaveOutWild(values, channel);
    if (pixels > 0) {
      const value = farthest.toPrecision(3);
      notice(
        "wild-pixels",
        `${channel}: ${pixels} ${pixels === 1 ? "pixel" : "pixels"} far outside the values of all others (${value}) ${pixels === 1 ? "counts" : "count"} as not measured`,
        [String(pixels), value],
      );
    }
    return values;
  };
  const amplitude = sane(raw.amplitude, "amplitude");
  const unmeasured = countUnmeasured(amplitude, rows, cols);
  const clipped = clippedShare(endsOf(amplitude));
  if (clipped > 0.001) {
    const share = (100 * clipped).toFixed(1);
    notice("clipped-channel", `amplitude: ${share} % of the pixels sit at the channel's end value`, [share]);
  }
  if (unmeasured.pixels === rows * cols) notice("empty-frame", "amplitude: no pixel was measured");

  const topography =
    raw.topography === null
      ? null
      : cleanTopography(sane(raw.topography, "topography"), rows, cols, raw.retraceNoise?.topography, s);
  const phase = raw.phase === null ? null : wrapAll(finiteCopy(raw.phase));
  const signal = cleanSignal(amplitude, phase, rows, cols, raw.retraceNoise ?? {}, s);

  const scarPixels = (topography?.scarPixels ?? 0) + signal.scarPixels;
  const scarRuns = (topography?.scarRuns ?? 0) + signal.scarRuns;
  if (scarPixels > s.badFrameScarShare * rows * cols) {
    notice("many-scars", `${scarPixels} pixels in ${scarRuns} scars were left out`, [
      String(scarPixels),
      String(scarRuns),
    ]);
  }
  const noises = {
    topography: topography?.noise ?? null,
    amplitude: signal.amplitudeNoise,
    phase: signal.phaseNoise,
  };
  if (noises.phase !== null && noises.phase.sd > 1) {
    const sd = noises.phase.sd.toFixed(2);
    notice("phase-noisy", `phase: noise of ${sd} rad a pixel; it holds next to nothing`, [sd]);
  }
  const pixel = raw.amplitude.pixel;
  const raster = (data: Float32Array): Raster => makeRaster(data, rows, cols, pixel);
  return {
    clean: {
      frame: raw.frame,
      pixel,
      topography: topography === null ? null : raster(topography.values),
      amplitude: raster(amplitude),
      phase: signal.phase === null ? null : raster(signal.phase),
      rowGainErrorSd: signal.rowGainErrorSd,
    },
    report: {
      frame: raw.frame,
      scarPixels,
      scarRuns,
      unmeasuredShare: unmeasured.pixels / (rows * cols),
      unmeasuredRows: unmeasured.rows,
      clippedShare: clipped,
      rowGainSd: signal.rowGainSd,
      rowPhaseSdRad: signal.rowPhaseSdRad,
      rowPhaseStepSdRad: signal.rowPhaseStepSdRad,
      topographyRowSdNm: topography?.rowSdNm ?? null,
      noise: {
        amplitudeRelative: noises.amplitude.sd,
        phaseRad: noises.phase?.sd ?? null,
        topographyNm: noises.topography?.sd ?? null,
        byRetrace: CHANNELS.filter((c) => noises[c]?.byRetrace === true),
      },
      notices,
    },
  };
}

function cleanTopography(
  values: Float32Array,
  rows: number,
  cols: number,
  retraceNoise: number | undefined,
  s: CleanSettings,
): { values: Float32Array; scarPixels: number; scarRuns: number; rowSdNm: number; noise: NoiseByLevel } {
  levelSurface(values, rows, cols, s.levelDegree);
  const differences = measureNoise(values, null, rows, cols);
  const noise = scaledBy(differences, retraceNoise, differences.sd);
  const rowSdNm = s.correctRows ? alignHeights(values, rows, cols, noise, s) : 0;
  const scars = findScars({ values, level: null, noise, rows, cols, isAngle: false }, s);
  return { values, scarPixels: leaveOut(values, scars), scarRuns: scars.count, rowSdNm, noise };
}

interface CleanedSignal {
  readonly phase: Float32Array | null;
  readonly scarPixels: number;
  readonly scarRuns: number;
  readonly rowGainSd: number;
  readonly rowGainErrorSd: Float32Array | null;
  readonly rowPhaseSdRad: number | null;
  readonly rowPhaseStepSdRad: number | null;
  /** Relative. */
  readonly amplitudeNoise: NoiseByLevel;
  readonly phaseNoise: NoiseByLevel | null;
}

/** A row that could be compared with neither neighbour over pixels of one state had only the rough alignment over all pixels, which leaves
 *  about this share of the rows' scatter. */
const ROUGH_SHARE = 0.5;

/** What is left of each row's gain after its alignment, 1 sd: what its pixels could not tell, never more than the rows scattered by. */
function gainErrors(links: RowLinks, scatterSd: number, rows: number): Float32Array {
  const out = new Float32Array(rows).fill(ROUGH_SHARE * scatterSd);
  const line2 = scatterSd * scatterSd;
  for (let k = 0; k < links.rows.length; k++) {
    const beside = [links.ownVariance[k], k + 1 < links.rows.length ? links.ownVariance[k + 1] : Number.NaN];
    const told = beside.filter((v) => !Number.isNaN(v));
    if (told.length === 0) continue;
    const own = Math.min(...told);
    out[links.rows[k]] = Math.sqrt((line2 * own) / (line2 + own || 1));
  }
  return out;
}

/** Amplitude and phase, both in place. */
function cleanSignal(
  amplitude: Float32Array,
  phase: Float32Array | null,
  rows: number,
  cols: number,
  retraceNoise: NonNullable<RawFrame["retraceNoise"]>,
  s: CleanSettings,
): CleanedSignal {
  const relativeNoise = scaledBy(
    measureNoise(amplitude, amplitude, rows, cols, "relative"),
    retraceNoise.amplitude,
    measureNoise(amplitude, null, rows, cols).sd,
  );
  const scarsOf = (values: Float32Array, noise: NoiseByLevel, isAngle: boolean): Scars =>
    findScars({ values, level: amplitude, noise, rows, cols, isAngle }, s);
  const amplitudeScars = (): Scars => scarsOf(amplitude, absolute(relativeNoise), false);
  const gains = s.correctRows ? alignGains(amplitude, rows, cols, relativeNoise, amplitudeScars, s) : null;
  const found = [gains?.scars ?? amplitudeScars()];
  let phaseNoise: NoiseByLevel | null = null;
  let rowPhase: RowOffsets | null = null;
  if (phase !== null) {
    const differences = measureNoise(phase, amplitude, rows, cols, "angle");
    const noise = scaledBy(differences, retraceNoise.phase, differences.sd);
    const phaseScars = (): Scars => scarsOf(phase, noise, true);
    const aligned = gains === null ? null : alignPhases(phase, rows, cols, gains, noise, phaseScars, s);
    rowPhase = aligned?.offsets ?? null;
    turnToMean(phase);
    found.push(aligned?.scars ?? phaseScars());
    phaseNoise = noise;
  }
  let scarPixels = 0;
  for (const scars of found) {
    scarPixels += leaveOut(amplitude, scars);
    if (phase !== null) leaveOut(phase, scars);
  }
  return {
    phase,
    scarPixels,
    scarRuns: found.reduce((n, scars) => n + scars.count, 0),
    rowGainSd: gains?.sd ?? 0,
    rowGainErrorSd: gains === null ? null : gainErrors(gains.links, gains.sd, rows),
    rowPhaseSdRad: rowPhase?.whiteSd ?? null,
    rowPhaseStepSdRad: rowPhase?.walkSd ?? null,
    amplitudeNoise: relativeNoise,
    phaseNoise,
  };
}

/** The relative noise as a noise in the amplitude's unit. */
function absolute(relative: NoiseByLevel): NoiseByLevel {
  const centre = (b: number): number => relative.low + (relative.perLevel > 0 ? (b + 0.5) / relative.perLevel : 0);
  return { ...relative, sds: relative.sds.map((sd, b) => sd * centre(b)) };
}

/** @returns how many pixels were measured there */
function leaveOut(values: Float32Array, scars: Scars): number {
  let pixels = 0;
  for (const [from, to] of scars.runs) {
    for (let p = from; p < to; p++) if (!Number.isNaN(values[p])) pixels++;
    values.fill(Number.NaN, from, to);
  }
  return pixels;
}

function finiteCopy(raster: Raster): Float32Array {
  const values = dataOf(raster).slice();
  for (let p = 0; p < values.length; p++) if (!Number.isFinite(values[p])) values[p] = Number.NaN;
  return values;
}

function countUnmeasured(values: Float32Array, rows: number, cols: number): { pixels: number; rows: number } {
  let pixels = 0;
  let empty = 0;
  for (let i = 0; i < rows; i++) {
    let n = 0;
    for (let j = 0; j < cols; j++) if (Number.isNaN(values[i * cols + j])) n++;
    pixels += n;
    if (n === cols) empty++;
  }
  return { pixels, rows: empty };
}
