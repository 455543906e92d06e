import { mergeSpec, simulateCooldown, type CooldownSpec, type FrameTruth } from "../demo/index.js";
import { dataOf } from "../model/raster.js";
import { INSULATING, METALLIC, NO_STATE, type DomainMap } from "../model/signal.js";

/** What the frames of a simulated cooldown would show without noise, debris or fringe, and where they show nothing. */
export interface EventTruth {
  /** Share of the metallic signal as the tip sees it, a frame, row-major. */
  readonly share: readonly Float32Array[];
  /** By pixel what hides the sample: 0 nothing, or one of the two below. */
  readonly hidden: readonly Uint8Array[];
  /** How far the share must be from one half for its side to be told: `DOUBT_SDS` standard deviations of its mean over a spot of the tip. */
  readonly doubt: number;
}

export const PARTICLE = 1;
export const NOT_MEASURED = 2;

/** Two-sided 95 %. */
const DOUBT_SDS = 2;

export function eventTruth(spec: CooldownSpec): EventTruth {
  const real = simulateCooldown(spec);
  const quiet = simulateCooldown(
    mergeSpec(spec, {
      fringe: { amplitudeRad: 0 },
      gain: { frameSd: 0, rowSd: 0, rowWalkSd: 0 },
      phaseOffset: { rowSdRad: 0, rowWalkSdRad: 0, anyPhase: false },
      noise: { complex: 0, amplitude: 0, phaseRad: 0 },
      debris: { perUm2: 0 },
      scars: { perFrame: 0 },
      unmeasured: { chance: 0 },
    }),
  );
  const share: Float32Array[] = [];
  const hidden: Uint8Array[] = [];
  for (let k = 0; k < real.plan.length; k++) {
    const { amplitude, phase, truth } = quiet.frame(k);
    const f = dataOf(phase);
    const c = chordOf(truth.levels);
    share.push(
      Float32Array.from(dataOf(amplitude), (m, p) => {
        const re = m * Math.cos(f[p]) - c.re0;
        const im = m * Math.sin(f[p]) - c.im0;
        return (re * c.re + im * c.im) / c.length ** 2;
      }),
    );
    const { measured, debris } = real.frame(k).truth;
    hidden.push(measured.map((v, p) => (v === 0 ? NOT_MEASURED : debris[p] === 1 ? PARTICLE : 0)));
  }
  return { share, hidden, doubt: DOUBT_SDS * shareSd(spec, chordOf(quiet.frame(0).truth.levels)) };
}

function chordOf(l: FrameTruth["levels"]) {
  const re0 = l.amplitudeInsulating * Math.cos(l.phaseInsulatingRad);
  const im0 = l.amplitudeInsulating * Math.sin(l.phaseInsulatingRad);
  const re = l.amplitudeMetallic * Math.cos(l.phaseMetallicRad) - re0;
  const im = l.amplitudeMetallic * Math.sin(l.phaseMetallicRad) - im0;
  return { re0, im0, re, im, length: Math.hypot(re, im), middle: Math.hypot(re0 + re / 2, im0 + im / 2) };
}

/** Standard deviation of the share's mean over a spot of the tip, at one half: pixel noise over the spot's pixels, the rows' gain and phase over its rows. */
function shareSd(spec: CooldownSpec, chord: ReturnType<typeof chordOf>): number {
  const { noise, pixel, gain, phaseOffset } = spec;
  const { length, middle } = chord;
  // Gaussian smoothing by s pixels leaves one independent value in 2√π·s pixels of an axis.
  const along = (s: number): number => Math.max(1, 2 * Math.sqrt(Math.PI) * s);
  const spotPx = (Math.PI * (spec.tip.resolutionNm / 2) ** 2) / (pixel.xNm * pixel.yNm);
  const values = Math.max(1, spotPx / (along(noise.correlationXPx) * along(noise.correlationYPx)));
  const rows = Math.max(1, spec.tip.resolutionNm / pixel.yNm);
  const pixelSd = Math.hypot(noise.complex, noise.amplitude, middle * noise.phaseRad);
  const rowSd = middle * Math.hypot(gain.rowSd, phaseOffset.rowSdRad);
  return Math.hypot(pixelSd / Math.sqrt(values), rowSd / Math.sqrt(rows)) / length;
}

/** The map of frame k, divided half-way between the levels.
 *  @param seen     the program's map of the frame, for the scars: what it gives no state although it was measured and no particle is in sight
 *  @param doubtful what pixels in doubt (rows not measured, scars, share too near to one half) are taken for; null: for what they are */
export function trueMap(
  t: EventTruth,
  k: number,
  seen: DomainMap,
  doubtful: "metallic" | "insulating" | null,
): DomainMap {
  const { rows, cols, pixel } = seen;
  const level = doubtful === null ? 0.5 : doubtful === "metallic" ? 0.5 - t.doubt : 0.5 + t.doubt;
  const filling = doubtful === "metallic" ? METALLIC : INSULATING;
  const states = Uint8Array.from(t.share[k], (v, p) => {
    const hidden = t.hidden[k][p];
    const isGap = hidden === NOT_MEASURED || (hidden === 0 && seen.states[p] === NO_STATE);
    if (doubtful !== null && isGap) return filling;
    return v > level ? METALLIC : INSULATING;
  });
  return { rows, cols, pixel, states };
}
