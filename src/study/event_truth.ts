import { mergeSpec, simulateCooldown, type CooldownSpec, type FrameTruth } from "../demo/index.js";
import { dataOf } from "../model/raster.js";
import { INSULATING, METALLIC, type DomainMap } from "../model/signal.js";

/** What the frames of a simulated cooldown would show without noise, debris or fringe, and where they show nothing. */
export interface EventTruth {
  /** Share of the metallic signal as the tip sees it, a frame, row-major. */
  readonly share: readonly Float32Array[];
  /** By pixel what hides the sample: 0 nothing, 1 a particle in sight, 2 the row was not measured. */
  readonly hidden: readonly Uint8Array[];
  /** How far the share must be from one half for its side to be told: `DOUBT_SDS` standard deviations of its mean over a spot of the tip. */
  readonly doubt: number;
}

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
    hidden.push(measured.map((v, p) => (v === 0 ? 2 : debris[p])));
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
 *  @param doubtful what pixels in doubt (hidden, or too near to one half) are taken for; null: for what they are */
export function trueMap(
  t: EventTruth,
  k: number,
  shape: Omit<DomainMap, "states">,
  doubtful: "metallic" | "insulating" | null,
): DomainMap {
  const { hidden, share } = t;
  const level = doubtful === null ? 0.5 : doubtful === "metallic" ? 0.5 - t.doubt : 0.5 + t.doubt;
  const states = Uint8Array.from(share[k], (v, p) => {
    if (doubtful !== null && hidden[k][p] === 1) return doubtful === "metallic" ? METALLIC : INSULATING;
    return v > level ? METALLIC : INSULATING;
  });
  return { ...shape, states };
}
