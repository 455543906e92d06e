import { makeRaster, type PixelSize } from "../../../src/model/raster.js";
import type { CleanFrame } from "../../../src/model/signal.js";
import { makeRandom } from "../../../src/numerics/random.js";

/** A surface that is known in closed form at every place: plane waves of a film's texture, and particles. Places in nm. */
export interface Scene {
  height(xNm: number, yNm: number): number;
  /** The surface sampled without noise at x = col·pixel + atX. */
  render(rows: number, cols: number, pixel: PixelSize, atXNm: number, atYNm: number): Float32Array;
}

export interface SceneOptions {
  readonly seed: number;
  readonly waves?: number;
  /** Correlation length of the texture, nm; its spectrum falls as exp(−k²·length²/2). */
  readonly lengthNm?: number;
  readonly particles?: number;
  readonly particleHeight?: number;
  readonly particleSigmaNm?: number;
  /** Particles lie in a square of this half side round (0, 0), nm. */
  readonly fieldNm?: number;
}

/** Texture of standard deviation 1. */
export function makeScene(o: SceneOptions): Scene {
  const random = makeRandom(o.seed);
  const waves = o.waves ?? 150;
  const length = o.lengthNm ?? 40;
  const kx = new Float64Array(waves);
  const ky = new Float64Array(waves);
  const phase = new Float64Array(waves);
  for (let w = 0; w < waves; w++) {
    kx[w] = random.normal() / length;
    ky[w] = random.normal() / length;
    phase[w] = 2 * Math.PI * random.uniform();
  }
  const size = Math.sqrt(2 / waves);
  const field = o.fieldNm ?? 4000;
  const particles = Array.from({ length: o.particles ?? 0 }, () => ({
    x: field * (2 * random.uniform() - 1),
    y: field * (2 * random.uniform() - 1),
    h: (o.particleHeight ?? 8) * (0.5 + random.uniform()),
    s: o.particleSigmaNm ?? 30,
  }));
  const height = (x: number, y: number): number => {
    let z = 0;
    for (let w = 0; w < waves; w++) z += size * Math.cos(kx[w] * x + ky[w] * y + phase[w]);
    for (const p of particles) z += p.h * Math.exp(-((x - p.x) ** 2 + (y - p.y) ** 2) / (2 * p.s * p.s));
    return z;
  };
  const render = (rows: number, cols: number, pixel: PixelSize, atX: number, atY: number): Float32Array => {
    const out = new Float64Array(rows * cols);
    const cx = new Float64Array(cols);
    const sx = new Float64Array(cols);
    for (let w = 0; w < waves; w++) {
      for (let j = 0; j < cols; j++) {
        const a = kx[w] * (j * pixel.xNm + atX);
        cx[j] = size * Math.cos(a);
        sx[j] = size * Math.sin(a);
      }
      for (let i = 0; i < rows; i++) {
        const b = ky[w] * (i * pixel.yNm + atY) + phase[w];
        const c = Math.cos(b);
        const s = Math.sin(b);
        for (let j = 0, p = i * cols; j < cols; j++, p++) out[p] += c * cx[j] - s * sx[j];
      }
    }
    for (const q of particles) {
      const reachX = Math.ceil((6 * q.s) / pixel.xNm);
      const reachY = Math.ceil((6 * q.s) / pixel.yNm);
      const j0 = Math.round((q.x - atX) / pixel.xNm);
      const i0 = Math.round((q.y - atY) / pixel.yNm);
      for (let i = Math.max(0, i0 - reachY); i <= Math.min(rows - 1, i0 + reachY); i++) {
        for (let j = Math.max(0, j0 - reachX); j <= Math.min(cols - 1, j0 + reachX); j++) {
          const d2 = (j * pixel.xNm + atX - q.x) ** 2 + (i * pixel.yNm + atY - q.y) ** 2;
          out[i * cols + j] += q.h * Math.exp(-d2 / (2 * q.s * q.s));
        }
      }
    }
    return Float32Array.from(out);
  };
  return { height, render };
}

export interface Blemishes {
  readonly noise?: number;
  /** Standard deviation of an offset for each row. */
  readonly rowNoise?: number;
  readonly missingRows?: number;
  /** Runs of NaN, and as many runs of a wrong height that nobody has found. */
  readonly scars?: number;
}

/** Adds noise and defects in place. */
export function blemish(data: Float32Array, rows: number, cols: number, seed: number, b: Blemishes): Float32Array {
  const random = makeRandom(seed);
  for (let p = 0; p < data.length; p++) data[p] += (b.noise ?? 0) * random.normal();
  for (let i = 0; i < rows; i++) {
    const offset = (b.rowNoise ?? 0) * random.normal();
    for (let j = 0; j < cols; j++) data[i * cols + j] += offset;
  }
  for (let k = 0; k < 2 * (b.scars ?? 0); k++) {
    const i = random.below(rows);
    const j = random.below(cols);
    for (let c = j; c < Math.min(cols, j + 5 + random.below(30)); c++) {
      if (k % 2 === 0) data[i * cols + c] = Number.NaN;
      else data[i * cols + c] += 5;
    }
  }
  for (let k = 0; k < (b.missingRows ?? 0); k++) {
    const i = random.below(rows);
    data.fill(Number.NaN, i * cols, (i + 1) * cols);
  }
  return data;
}

/** A frame with topography only of interest; its amplitude is flat. */
export function topographyFrame(
  frame: number,
  data: Float32Array,
  rows: number,
  cols: number,
  pixel: PixelSize,
): CleanFrame {
  return {
    frame,
    pixel,
    topography: makeRaster(data, rows, cols, pixel),
    amplitude: makeRaster(new Float32Array(rows * cols).fill(1), rows, cols, pixel),
    phase: null,
  };
}

/** Standard deviations (x, y) in nm of a shift between two frames of white noise `sigma` each: the Cramér–Rao bound 2σ²J⁻¹ on pixels that
 *  both see, from exact gradients. */
export function bound(
  scene: Scene,
  rows: number,
  cols: number,
  pixel: PixelSize,
  sigma: number,
  at: { x: number; y: number },
  other: { x: number; y: number },
): { x: number; y: number } {
  const h = 0.01;
  const x0 = Math.max(at.x, other.x);
  const x1 = Math.min(at.x, other.x) + (cols - 1) * pixel.xNm;
  const y0 = Math.max(at.y, other.y);
  const y1 = Math.min(at.y, other.y) + (rows - 1) * pixel.yNm;
  const n = Math.floor((y1 - y0) / pixel.yNm) + 1;
  const m = Math.floor((x1 - x0) / pixel.xNm) + 1;
  const east = scene.render(n, m, pixel, x0 + h * pixel.xNm, y0);
  const west = scene.render(n, m, pixel, x0 - h * pixel.xNm, y0);
  const south = scene.render(n, m, pixel, x0, y0 + h * pixel.yNm);
  const north = scene.render(n, m, pixel, x0, y0 - h * pixel.yNm);
  let xx = 0;
  let xy = 0;
  let yy = 0;
  for (let p = 0; p < n * m; p++) {
    const gx = (east[p] - west[p]) / (2 * h * pixel.xNm);
    const gy = (south[p] - north[p]) / (2 * h * pixel.yNm);
    xx += gx * gx;
    xy += gx * gy;
    yy += gy * gy;
  }
  const det = xx * yy - xy * xy;
  return { x: sigma * Math.sqrt((2 * yy) / det), y: sigma * Math.sqrt((2 * xx) / det) };
}
