import type { Problem } from "../model/errors.js";
import { IMAGE_KEYS, type ImageKey } from "./schema.js";

/**
 * Whether the images named for one frame, or one series, give one amplitude and at most one phase: `amplitude` (with `phase`), or
 * `signal` (complex numbers), or `real` with `imaginary`. "none": no amplitude at all.
 */
export function signalProblem(given: Partial<Record<ImageKey, unknown>>): Omit<Problem, "at"> | "none" | null {
  const has = (key: ImageKey): boolean => given[key] !== undefined;
  const polar = has("amplitude") || has("phase");
  const parts = has("real") || has("imaginary");
  const forms = [polar ? "amplitude or phase" : "", has("signal") ? "signal" : "", parts ? "real or imaginary" : ""];
  const used = forms.filter((f) => f !== "");
  if (used.length > 1) {
    return {
      problem: `${used.join(" beside ")}: the signal is given twice`,
      fix: "give `amplitude` and `phase`, or `signal` (complex numbers), or `real` and `imaginary`",
    };
  }
  if (parts && has("real") !== has("imaginary")) {
    const missing = has("real") ? "imaginary" : "real";
    return { problem: `${has("real") ? "real" : "imaginary"} without ${missing}`, fix: `add \`${missing}\`` };
  }
  const lone = IMAGE_KEYS.find((k) => k.endsWith("_retrace") && has(k) && given[traceOf(k)] === undefined);
  if (lone !== undefined) {
    return { problem: `${lone} without ${traceOf(lone)}`, fix: `give the trace as \`${traceOf(lone)}\`` };
  }
  return has("amplitude") || has("signal") || has("real") ? null : "none";
}

/** `amplitude` of `amplitude_retrace`. */
function traceOf(key: ImageKey): ImageKey {
  if (key === "topography_retrace") return "topography";
  return key === "phase_retrace" ? "phase" : "amplitude";
}
