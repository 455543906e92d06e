import { FWHM_PER_SIGMA } from "../../../src/model/units.js";
import { makeRaster, type PixelSize } from "../../../src/model/raster.js";
import { normalCdf } from "../../../src/numerics/erf.js";
import type { Random } from "../../../src/numerics/random.js";
import {
  type CutLine,
  type TipChannel,
  type TipImage,
  type TipMeasured,
  type TipResult,
  type WarningCode,
  prepareTipImage,
} from "../../../src/stages/tip/index.js";

export interface Scene {
  readonly rows: number;
  readonly cols: number;
  readonly pixel: PixelSize;
}

/** The frame's middle, nm. */
export const middleOf = (s: Scene): { xNm: number; yNm: number } => ({
  xNm: ((s.cols - 1) / 2) * s.pixel.xNm,
  yNm: ((s.rows - 1) / 2) * s.pixel.yNm,
});

export function draw(scene: Scene, value: (xNm: number, yNm: number) => number): Float64Array {
  const out = new Float64Array(scene.rows * scene.cols);
  for (let i = 0; i < scene.rows; i++)
    for (let j = 0; j < scene.cols; j++) out[i * scene.cols + j] = value(j * scene.pixel.xNm, i * scene.pixel.yNm);
  return out;
}

/** A sharp straight edge under a Gaussian tip: 1 at low, 1 + contrast beyond, the normal at `angleDeg` from +x. */
export function edgeScene(
  scene: Scene,
  fwhmNm: number,
  angleDeg: number,
  offsetNm: number,
  contrast = 1,
): Float64Array {
  const a = (angleDeg * Math.PI) / 180;
  const m = middleOf(scene);
  const sigma = fwhmNm / FWHM_PER_SIGMA;
  return draw(scene, (x, y) => {
    const d = (x - m.xNm) * Math.cos(a) + (y - m.yNm) * Math.sin(a) - offsetNm;
    return 1 + contrast * normalCdf(d / sigma);
  });
}

/** A disc of `diameterNm` under a Gaussian tip, by quadrature over the disc's chords: nothing of the program's own disc. */
export function discScene(
  scene: Scene,
  fwhmNm: number,
  diameterNm: number,
  centre: { xNm: number; yNm: number },
  contrast = 1,
): Float64Array {
  const sigma = fwhmNm / FWHM_PER_SIGMA;
  const R = diameterNm / 2;
  const n = 48;
  return draw(scene, (x, y) => {
    const dx = x - centre.xNm;
    const dy = y - centre.yNm;
    if (Math.hypot(dx, dy) > R + 8 * sigma) return 1;
    let sum = 0;
    // x = R sin θ: the chord's half-length is R cos θ, and the midpoint rule converges fast
    for (let k = 0; k < n; k++) {
      const th = ((k + 0.5) / n - 0.5) * Math.PI;
      const u = R * Math.sin(th) - dx;
      const c = R * Math.cos(th);
      const g = Math.exp((-0.5 * u * u) / (sigma * sigma)) / (sigma * Math.sqrt(2 * Math.PI));
      sum += g * (normalCdf((c - dy) / sigma) - normalCdf((-c - dy) / sigma)) * c;
    }
    return 1 + contrast * sum * (Math.PI / n);
  });
}

/** A line through a point near the frame's middle at an angle from +x, half-length `half`. */
export function lineThrough(scene: Scene, half: number, angleDeg: number, widthNm: number): CutLine {
  const a = (angleDeg * Math.PI) / 180;
  const m = middleOf(scene);
  return {
    from: { xNm: m.xNm - half * Math.cos(a), yNm: m.yNm - half * Math.sin(a) },
    to: { xNm: m.xNm + half * Math.cos(a), yNm: m.yNm + half * Math.sin(a) },
    widthNm,
  };
}

/** Signed distance from a straight edge through the frame's middle. */
export function alongNormal(scene: Scene, angleDeg: number, offsetNm: number): (x: number, y: number) => number {
  const a = (angleDeg * Math.PI) / 180;
  const m = middleOf(scene);
  return (x, y) => (x - m.xNm) * Math.cos(a) + (y - m.yNm) * Math.sin(a) - offsetNm;
}

/** The result, which must be a measurement. */
export function measured(r: TipResult): TipMeasured {
  if (r.status === "unusable") throw new Error(`unusable: ${r.message}`);
  return r;
}

export const codes = (r: TipMeasured): WarningCode[] => r.warnings.map((w) => w.code);

/** The image with white noise, ready to be measured. */
export function noisy(
  scene: Scene,
  clean: Float64Array,
  sd: number,
  random: Random,
  channel: TipChannel = "amplitude",
): TipImage {
  const data = Float32Array.from(clean, (v) => v + sd * random.normal());
  const raster = makeRaster(data, scene.rows, scene.cols, scene.pixel);
  const image = prepareTipImage({ topography: null, amplitude: raster, phase: null }, channel);
  if (image === null) throw new Error("the scene gives no image");
  return image;
}

/** A straight bar of `widthNm` without ends, its normal at `angleDeg` from +x. */
export function barScene(
  scene: Scene,
  fwhmNm: number,
  widthNm: number,
  angleDeg: number,
  offsetNm: number,
  contrast = 1,
): Float64Array {
  const a = (angleDeg * Math.PI) / 180;
  const m = middleOf(scene);
  const sigma = fwhmNm / FWHM_PER_SIGMA;
  return draw(scene, (x, y) => {
    const d = (x - m.xNm) * Math.cos(a) + (y - m.yNm) * Math.sin(a) - offsetNm;
    return 1 + contrast * (normalCdf((d + widthNm / 2) / sigma) - normalCdf((d - widthNm / 2) / sigma));
  });
}
