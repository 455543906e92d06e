import { type Raster, colsOf, dataOf, rowsOf } from "../../model/raster.js";
import { measureFrameNoise } from "./noise.js";
import type { TipImage } from "./types.js";

/** `complex`: amplitude and optical phase together, which is what the tip blurs. */
export type TipChannel = "amplitude" | "phase" | "topography" | "complex";

export interface TipFrame {
  readonly topography: Raster | null;
  readonly amplitude: Raster;
  readonly phase: Raster | null;
}

/** One channel of a frame made ready for fits, its noise measured. Null where the frame has not got it, or is too small (11 pixels a
 *  side) or too empty to measure a noise. Rows should be aligned before: a cut across rows takes their offsets for scatter. */
export function prepareTipImage(frame: TipFrame, channel: TipChannel): TipImage | null {
  const rows = rowsOf(frame.amplitude);
  const cols = colsOf(frame.amplitude);
  const amplitude = dataOf(frame.amplitude);
  const phase = frame.phase === null ? null : dataOf(frame.phase);
  const height = frame.topography === null ? null : dataOf(frame.topography);
  let components: Float32Array[];
  if (channel === "amplitude") components = [amplitude];
  else if (channel === "topography") components = height === null ? [] : [height];
  else if (channel === "phase") components = phase === null ? [] : [phase];
  else if (phase === null) components = [];
  else components = [amplitude.map((a, k) => a * Math.cos(phase[k])), amplitude.map((a, k) => a * Math.sin(phase[k]))];
  if (components.length === 0) return null;
  const isAngle = channel === "phase";
  const scale = isAngle ? amplitude : null;
  const noise = components.map((c) => measureFrameNoise(c, scale, isAngle, rows, cols));
  if (noise.some((n) => !(n.sd > 0))) return null;
  return {
    rows,
    cols,
    pixel: frame.amplitude.pixel,
    components,
    isAngle,
    amplitude: scale,
    noise,
    heightNm: channel === "topography" ? null : height,
    phaseRad: channel === "amplitude" ? phase : null,
  };
}
