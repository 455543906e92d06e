import { amplitudeDistortion, cost, distances, type Departure, type ShapeTests } from "./checks.js";
import type { Choice } from "./choose.js";
import type { ShapeFit } from "./fit_shape.js";
import { correlationSquared } from "./interval.js";
import type { FrameNoise } from "./noise.js";
import type { LineFrame } from "./pixels.js";
import { TILT } from "./shapes.js";
import type { TipSettings } from "./settings.js";
import type { TipImage, TipMeasured, TipWarning, WarningCode } from "./types.js";

/** Reduced χ² above which a fit leaves more than the noise: four standard errors, and 8 % for the noise's own uncertainty. */
export const scatterLimit = (fit: ShapeFit, noise: readonly FrameNoise[]): number =>
  1.08 + 4 * Math.sqrt((2 * correlationSquared(noise)) / fit.dof);

const nm = (v: number): string => v.toFixed(1);

/** What the feature, the sampling or the fit says against the number. */
export function judge(
  image: TipImage,
  frame: LineFrame,
  s: TipSettings,
  choice: Choice,
  r: Omit<TipMeasured, "warnings">,
  tests: ShapeTests,
  inflation: number,
): TipWarning[] {
  const { fit, model } = choice;
  const out: TipWarning[] = [];
  const warn = (code: WarningCode, message: string): void => void out.push({ code, message });
  const isEdge = model === "edge";
  /** Standard deviations of a departure. */
  const z = (d: Departure | null): number => (d === null ? 0 : d.value / (d.sd * Math.sqrt(inflation)));

  if (r.status === "upper-limit") {
    warn(
      "size-not-separable",
      "the particle is too small or too faint to tell its own size from the tip's: the width as seen is an upper limit of the tip's",
    );
  }
  const tilt = Math.atan(model === "dot" ? 0 : fit.theta[TILT]);
  const nx = frame.ux * Math.cos(tilt) + frame.uy * Math.sin(tilt);
  const ny = frame.uy * Math.cos(tilt) - frame.ux * Math.sin(tilt);
  const pitch =
    model === "dot"
      ? Math.max(image.pixel.xNm, image.pixel.yNm)
      : Math.hypot(nx * image.pixel.xNm, ny * image.pixel.yNm);
  const own = isEdge || r.status === "measured" ? r.fwhmNm : r.apparent.nm;
  if (pitch > own / 2) {
    warn("coarse-sampling", `pixels of ${nm(pitch)} nm are coarser than half of the width: measure on a finer scan`);
  }
  if (r.reducedChi2 > scatterLimit(fit, image.noise)) {
    warn(
      "poor-fit",
      `the fit leaves more than the noise (reduced chi-square ${r.reducedChi2.toFixed(2)}): other structure beside the line, or not this shape; the interval is widened by it`,
    );
  }
  if (image.noise.some((n) => Math.max(n.correlationX[0], n.correlationY[0]) > 0.2)) {
    warn(
      "correlated-noise",
      "neighbouring pixels share noise, or relief as fine as the pixels; the interval allows for it",
    );
  }
  const rim = z(tests.rim);
  const sides = z(tests.sides);
  if (isEdge && Math.abs(rim) > s.testSigmas && (tests.rim?.gain ?? 0) >= (tests.sides?.gain ?? 0)) {
    warn(
      "rim",
      `a ${rim > 0 === highSide(fit) ? "bright" : "dark"} rim along the edge: an edge artefact of the near field, the width is not the tip's`,
    );
  } else if (Math.abs(sides) > s.testSigmas) {
    warn(
      "asymmetric",
      `one side is wider than the other (${nm(r.sides.near.nm)} nm towards the line's start, ${nm(r.sides.far.nm)} nm beyond): not a sharp feature under a symmetric tip`,
    );
  }
  const lorentzian = z(tests.lorentzian);
  let tails: Departure | null = null;
  for (const d of [tests.lorentzian, tests.tanh]) {
    if (d === null || z(d) <= s.testSigmas) continue;
    if (tails === null || cost(d, choice.data) < cost(tails, choice.data)) tails = d;
  }
  if (tails !== null) {
    if (tails === tests.tanh) {
      warn(
        "soft-edge",
        "the profile has the tails of an edge with a width of its own (tanh): an upper limit of the tip's width",
      );
    } else {
      warn(
        "tails",
        "the response has tails, as a Lorentzian has: one full width at half maximum does not describe the tip, and widths corrected with it stay uncertain",
      );
    }
  } else if (!isEdge && lorentzian < -s.testSigmas) {
    warn(
      "rim",
      "a rim of opposite contrast round the particle: an edge artefact of the near field may be in the width",
    );
  }
  if (r.height !== null && Math.abs(r.height.nm) > Math.max(s.reliefNm, 4 * r.height.sdNm)) {
    warn(
      "relief",
      `the height changes by ${nm(r.height.nm)} nm here: an edge artefact of the near field (the tip's side) may be in the width` +
        (isEdge ? "; an edge without relief is better" : ""),
    );
  }
  if (fit.base === "plane" && isEdge && tails?.base !== "level")
    warn("uneven-plateaus", "the signal is not flat beside the edge; a common slope was fitted");
  const half = frame.lengthNm / 2;
  const free = half - Math.abs(fit.theta[0]) - (isEdge ? 0 : r.apparent.nm / 2);
  if (free < (isEdge ? 1.5 : 0.75) * r.fwhmNm) {
    warn("short-line", `only ${nm(Math.max(0, free))} nm of plateau lie on one side: lengthen the line`);
  }
  if (r.directions !== null && r.directions.pValue < 0.001) {
    warn("directions-differ", "the particle as seen is not round: it is longer one way, or the tip is");
  }
  if (model === "bar") {
    warn(
      "one-direction",
      "a long particle shows one direction only; a second feature across it would show whether the tip is round",
    );
  }
  if (image.phaseRad !== null) {
    const turn = phaseTurn(choice, image.phaseRad);
    const distortion = turn === null ? 0 : amplitudeDistortion(turn.low, turn.high, turn.rad);
    if (turn !== null && Math.abs(turn.rad) > 0.1 && (distortion === null || Math.abs(distortion) > 0.01)) {
      warn(
        "phase-turns",
        `the optical phase turns by ${turn.rad.toFixed(2)} rad here, so the amplitude alone is not what the tip blurs` +
          (distortion === null ? "" : ` (width off by about ${(100 * distortion).toFixed(0)} %)`) +
          ": use --channel complex",
      );
    }
  }
  return out;
}

/** Whether the first component rises along the line. */
const highSide = (fit: ShapeFit): boolean => fit.levels[fit.base === "plane" ? 3 : 1] > 0;

/** Amplitudes on both plateaus and the turn of the optical phase between them. */
function phaseTurn(choice: Choice, phaseRad: Float32Array): { low: number; high: number; rad: number } | null {
  const { fit, data } = choice;
  const g = new Float64Array(data.n);
  fit.shape.evaluate(fit.theta, data.s, data.t, g, null);
  const z = distances(fit, data);
  const mean = (inside: (k: number) => boolean): { rad: number; value: number } | null => {
    let c = 0;
    let s = 0;
    let v = 0;
    let n = 0;
    for (let k = 0; k < data.n; k++) {
      const p = phaseRad[data.index[k]];
      if (!inside(k) || !Number.isFinite(p)) continue;
      c += Math.cos(p);
      s += Math.sin(p);
      v += data.y[0][k];
      n++;
    }
    return n < 3 ? null : { rad: Math.atan2(s, c), value: v / n };
  };
  const low = mean((k) => g[k] < 0.02);
  const high = mean((k) =>
    fit.shape.model === "edge" ? g[k] > 0.98 : g[k] > 0.8 || Math.abs(z[k]) < 0.2 * fit.theta[2],
  );
  if (low === null || high === null) return null;
  const d = high.rad - low.rad;
  return { low: low.value, high: high.value, rad: d - 2 * Math.PI * Math.round(d / (2 * Math.PI)) };
}
