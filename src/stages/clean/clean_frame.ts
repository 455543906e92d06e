import type { FrameNoise } from "../../model/analysis.js";
import { CHANNELS, type Notice, type RawFrame } from "../../model/cooldown.js";
import { type Raster, colsOf, dataOf, makeRaster, rowsOf } from "../../model/raster.js";
import type { CleanFrame } from "../../model/signal.js";
import { wrapAngle } from "../../numerics/quantile.js";
import { flatPixels } from "./flat_pixels.js";
import { levelSurface } from "./level.js";
import { clippedShare, measureNoise, scaledBy, type NoiseByLevel } from "./noise.js";
import { linkRows, type RowLinks } from "./row_links.js";
import { type RowOffsets, splitRowOffsets } from "./row_model.js";
import { type Scars, findScars } from "./scars.js";
import type { CleanSettings } from "./settings.js";

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
  const notice = (code: string, message: string): void => void notices.push({ frame: raw.frame, code, message });

  const amplitude = finiteCopy(raw.amplitude);
  const unmeasured = countUnmeasured(amplitude, rows, cols);
  const clipped = clippedShare(amplitude);
  if (clipped > 0.001) {
    notice(
      "clipped-channel",
      `amplitude: ${(100 * clipped).toFixed(1)} % of the pixels sit at the channel's end value`,
    );
  }
  if (unmeasured.pixels === rows * cols) notice("empty-frame", "amplitude: no pixel was measured");

  const topography = raw.topography === null ? null : cleanTopography(raw.topography, raw.retraceNoise?.topography, s);
  const phase = raw.phase === null ? null : wrapped(finiteCopy(raw.phase));
  const signal = cleanSignal(amplitude, phase, rows, cols, raw.retraceNoise ?? {}, s);

  const scarPixels = (topography?.scars.pixels ?? 0) + signal.scars.pixels;
  const scarRuns = (topography?.scars.runs ?? 0) + signal.scars.runs;
  if (scarPixels > s.badFrameScarShare * rows * cols) {
    notice("many-scars", `${scarPixels} pixels in ${scarRuns} scars were left out`);
  }
  const noises = {
    topography: topography?.noise ?? null,
    amplitude: signal.amplitudeNoise,
    phase: signal.phaseNoise,
  };
  if (noises.phase !== null && noises.phase.sd > 1) {
    notice("phase-noisy", `phase: noise of ${noises.phase.sd.toFixed(2)} rad a pixel; it holds next to nothing`);
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
  raster: Raster,
  retraceNoise: number | undefined,
  s: CleanSettings,
): { values: Float32Array; scars: Scars; rowSdNm: number; noise: NoiseByLevel } {
  const rows = rowsOf(raster);
  const cols = colsOf(raster);
  const values = finiteCopy(raster);
  levelSurface(values, rows, cols, s.levelDegree);
  const differences = measureNoise(values, null, rows, cols, false);
  const noise = scaledBy(differences, retraceNoise, differences.sd);
  let rowSdNm = 0;
  if (s.correctRows) {
    const links = linkRows(values, null, null, noise, rows, cols, false, s.leastRowPixels);
    const offsets = splitRowOffsets(links, rows);
    rowSdNm = offsets.whiteSd;
    // a lasting jump of all pixels from one row to the next is the tip's or the scanner's, never the sample's
    addRows(values, rows, cols, (i) => -(offsets.white[i] + offsets.outlying[i] + offsets.jumps[i]));
  }
  const scars = findScars(values, null, noise, rows, cols, false, s.scarSigmas, s.scarLeastPixels);
  leaveOut(values, scars);
  return { values, scars, rowSdNm, noise };
}

interface CleanedSignal {
  readonly phase: Float32Array | null;
  readonly scars: Scars;
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
  const log = new Float32Array(amplitude.length);
  // noise can carry a weak amplitude to zero or below: such pixels keep their value, only ratios leave them out
  for (let p = 0; p < log.length; p++) log[p] = amplitude[p] > 0 ? Math.log(amplitude[p]) : Number.NaN;
  const logNoise = scaledBy(
    measureNoise(log, amplitude, rows, cols, false),
    retraceNoise.amplitude,
    measureNoise(amplitude, null, rows, cols, false).sd,
  );
  const scarsOf = (values: Float32Array, noise: NoiseByLevel, isAngle: boolean): Scars =>
    findScars(values, amplitude, noise, rows, cols, isAngle, s.scarSigmas, s.scarLeastPixels);
  let rowGainSd = 0;
  let lastLinks: RowLinks | null = null;
  let flat: Uint8Array | null = null;
  let scarred: Scars | null = null;
  if (s.correctRows) {
    // Twice: rows of another gain would look like boundaries to the search for flat pixels. Scars are taken out in between: among all
    // pixels of a row they are few, among the flat ones of a row full of walls they may be the most.
    for (const pass of [0, 1]) {
      if (pass === 1) {
        scarred = scarsOf(amplitude, absolute(logNoise), false);
        leaveOut(log, scarred);
        flat = flatPixels(log, amplitude, logNoise, rows, cols, rowGainSd);
      }
      const links = linkRows(log, amplitude, flat, logNoise, rows, cols, false, s.leastRowPixels);
      const offsets = splitRowOffsets(links, rows);
      rowGainSd = Math.hypot(rowGainSd, offsets.whiteSd);
      lastLinks = links;
      // neither the walk nor lasting jumps: a front between the states that runs along the rows looks like them
      const correction = (i: number): number => -(offsets.white[i] + offsets.outlying[i]);
      addRows(log, rows, cols, correction);
      scaleRows(amplitude, rows, cols, (i) => Math.exp(correction(i)));
    }
  }
  let phaseNoise = null;
  let rowPhaseSdRad: number | null = null;
  let rowPhaseStepSdRad: number | null = null;
  if (phase !== null) {
    const differences = measureNoise(phase, amplitude, rows, cols, true);
    phaseNoise = scaledBy(differences, retraceNoise.phase, differences.sd);
    if (s.correctRows) {
      const linked = phase.slice();
      if (scarred !== null) leaveOut(linked, scarred);
      const noise = phaseNoise;
      const align = (values: Float32Array, by: Float32Array, among: Uint8Array | null): RowOffsets => {
        const offsets = splitRowOffsets(
          linkRows(by, amplitude, among, noise, rows, cols, true, s.leastRowPixels),
          rows,
        );
        addRows(
          values,
          rows,
          cols,
          (i) => -(offsets.white[i] + offsets.walk[i] + offsets.outlying[i] + offsets.jumps[i]),
        );
        return offsets;
      };
      // the rows' gains are now better known than when their boundaries were first looked for
      flat = flatPixels(log, amplitude, logNoise, rows, cols, rowGainSd);
      const rough = phase.slice();
      align(rough, linked, null);
      leaveOut(linked, scarsOf(rough, phaseNoise, true));
      const offsets = align(phase, linked, flat);
      rowPhaseSdRad = offsets.whiteSd;
      rowPhaseStepSdRad = offsets.walkSd;
    }
    turnToMean(phase);
  }
  let scars = scarsOf(amplitude, absolute(logNoise), false);
  if (phase !== null && phaseNoise !== null) scars = join(scars, scarsOf(phase, phaseNoise, true));
  for (let p = 0; p < amplitude.length; p++) {
    if (scars.mask[p] === 0) continue;
    amplitude[p] = Number.NaN;
    if (phase !== null) phase[p] = Number.NaN;
  }
  return {
    phase,
    scars,
    rowGainSd,
    rowGainErrorSd: lastLinks === null ? null : gainErrors(lastLinks, rowGainSd, rows),
    rowPhaseSdRad,
    rowPhaseStepSdRad,
    amplitudeNoise: logNoise,
    phaseNoise,
  };

  /** The relative noise as a noise in the amplitude's unit. */
  function absolute(relative: typeof logNoise): typeof logNoise {
    const centre = (b: number): number =>
      relative.perLevel > 0 ? relative.low + (b + 0.5) / relative.perLevel : typical;
    const typical = relative.low;
    return { ...relative, sds: relative.sds.map((sd, b) => sd * centre(b)) };
  }
}

function leaveOut(values: Float32Array, scars: Scars): void {
  for (let p = 0; p < values.length; p++) if (scars.mask[p] === 1) values[p] = Number.NaN;
}

function join(a: Scars, b: Scars): Scars {
  const mask = a.mask.slice();
  let pixels = 0;
  for (let p = 0; p < mask.length; p++) pixels += mask[p] |= b.mask[p];
  return { mask, pixels, runs: a.runs + b.runs };
}

function finiteCopy(raster: Raster): Float32Array {
  const values = dataOf(raster).slice();
  for (let p = 0; p < values.length; p++) if (!Number.isFinite(values[p])) values[p] = Number.NaN;
  return values;
}

function wrapped(phase: Float32Array): Float32Array {
  for (let p = 0; p < phase.length; p++) phase[p] = wrapAngle(phase[p]);
  return phase;
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

function addRows(values: Float32Array, rows: number, cols: number, offset: (row: number) => number): void {
  for (let i = 0; i < rows; i++) {
    const o = offset(i);
    if (o !== 0) for (let j = 0; j < cols; j++) values[i * cols + j] += o;
  }
}

function scaleRows(values: Float32Array, rows: number, cols: number, factor: (row: number) => number): void {
  for (let i = 0; i < rows; i++) {
    const f = factor(i);
    if (f !== 1) for (let j = 0; j < cols; j++) values[i * cols + j] *= f;
  }
}

/** Turns an image of angles so that its circular mean is 0, in (−π, π]. */
function turnToMean(phase: Float32Array): void {
  let c = 0;
  let s = 0;
  for (const a of phase) {
    if (Number.isNaN(a)) continue;
    c += Math.cos(a);
    s += Math.sin(a);
  }
  const mean = Math.atan2(s, c);
  for (let p = 0; p < phase.length; p++) {
    // rounded to single precision first: π itself must not come back as a little more than π
    phase[p] = Math.min(wrapAngle(phase[p] - mean), 3.1415925);
  }
}
