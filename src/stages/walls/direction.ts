import { fastKink } from "../../numerics/kink.js";
import type { FrameLevels, Signal } from "../../model/signal.js";
import { varianceAlong } from "./noise.js";
import type { ProfileData } from "./profile_data.js";

/** How the complex signal is turned into one number a pixel.
 *  - `chord`: along z_M − z_I. All of the two-state contrast, but a fringe turns z off the chord and bends this projection.
 *  - `radial`: along the direction that z itself has at that distance from the wall, as measured along the whole wall. A fringe of
 *    the optical phase turns z without changing its length, so that this projection does not see it but through the tip's blur;
 *    the price is the part of the contrast across z.
 *  - `amplitude`: no optical phase; the amplitude is taken as mixing linearly, which it does only where the two phases agree. */
export type Direction = "chord" | "radial" | "amplitude";

/** Levels and noise of one frame, prepared for projecting. */
export class Projector {
  readonly hasPhase: boolean;
  /** Share of the information on the wall's shape that the radial direction keeps (1 = all). */
  readonly radialInformation: number;
  readonly contrast: number;
  private readonly ex: number;
  private readonly ey: number;
  private readonly sizeI: number;
  private readonly sizeM: number;
  private readonly u = new Float64Array(4);

  constructor(
    private readonly signal: Signal,
    private readonly levels: FrameLevels,
    private readonly tipSigma: number,
  ) {
    const { insulating: a, metallic: b } = levels;
    this.hasPhase = signal.im !== null;
    const dre = b.re - a.re;
    const dim = this.hasPhase ? b.im - a.im : 0;
    this.contrast = Math.hypot(dre, dim);
    this.ex = this.contrast > 0 ? dre / this.contrast : 1;
    this.ey = this.contrast > 0 ? dim / this.contrast : 0;
    this.sizeI = this.hasPhase ? Math.hypot(a.re, a.im) : a.re;
    this.sizeM = this.hasPhase ? Math.hypot(b.re, b.im) : b.re;
    let kept = 0;
    let count = 0;
    for (let u = 0.05; u < 1; u += 0.1) {
      const re = a.re + dre * u;
      const im = (this.hasPhase ? a.im : 0) + dim * u;
      const along = (re * this.ex + im * this.ey) ** 2 / Math.max(re * re + im * im, 1e-300);
      const slope = u * (1 - u);
      kept += along * slope * slope;
      count += slope * slope;
    }
    this.radialInformation = kept / count;
  }

  /** Levels to start a fit from, in the unit of the projection. */
  startLevels(direction: Direction): { insulating: number; metallic: number } {
    const { insulating: a, metallic: b } = this.levels;
    if (direction !== "chord") return { insulating: this.sizeI, metallic: this.sizeM };
    return { insulating: a.re * this.ex + a.im * this.ey, metallic: b.re * this.ex + b.im * this.ey };
  }

  /** Amplitude |z| of a fitted level. */
  amplitude(direction: Direction, state: "insulating" | "metallic", fitted: number): number {
    if (direction !== "chord") return fitted;
    const z = this.levels[state];
    const off = fitted - (z.re * this.ex + z.im * this.ey);
    return Math.hypot(z.re + off * this.ex, z.im + off * this.ey);
  }

  /** Value, alpha, beta and weight of pixel `pixel` into slot k of `data`; w and σ say where between the states it is expected,
   *  `turnRad` by how much a fringe turns the signal there and `turnSlope` its slope in rad/nm (radial direction only). */
  put(
    data: ProfileData,
    k: number,
    pixel: number,
    distanceNm: number,
    w: number,
    sigma: number,
    direction: Direction,
    turnRad: number,
    turnSlope: number,
  ): void {
    fastKink(distanceNm, w, sigma, this.u);
    const u = this.u[0];
    const { insulating: a, metallic: b, noiseInsulating, noiseMetallic } = this.levels;
    const re = this.signal.re[pixel];
    let ex = 1;
    let ey = 0;
    let im = 0;
    let alpha = 1;
    let beta = 1;
    let bend = 0;
    if (this.signal.im !== null) {
      im = this.signal.im[pixel];
      ex = this.ex;
      ey = this.ey;
      if (direction === "radial") {
        const zr = a.re + (b.re - a.re) * u;
        const zi = a.im + (b.im - a.im) * u;
        const size = Math.hypot(zr, zi);
        ex = zr / size;
        ey = zi / size;
        alpha = (a.re * ex + a.im * ey) / this.sizeI;
        beta = (b.re * ex + b.im * ey) / this.sizeM;
        // what the tip's blur makes of a turn that changes across the wall: to first order a shift, to second a loss of length
        const twist = b.im * a.re - b.re * a.im;
        bend = (turnSlope * this.tipSigma * this.tipSigma * this.u[1] * twist) / size;
        const kept = Math.exp(-0.5 * (turnSlope * this.tipSigma) ** 2);
        alpha *= kept;
        beta *= kept;
        const c = Math.cos(turnRad);
        const s = Math.sin(turnRad);
        const turned = ex * c - ey * s;
        ey = ex * s + ey * c;
        ex = turned;
      }
    }
    data.value[k] = re * ex + im * ey + bend;
    data.alpha[k] = alpha;
    data.beta[k] = beta;
    const variance = (1 - u) * varianceAlong(noiseInsulating, ex, ey) + u * varianceAlong(noiseMetallic, ex, ey);
    data.weight[k] = 1 / Math.sqrt(Math.max(variance, 1e-12 * this.contrast * this.contrast));
  }

  /** Departure of a pixel well inside a state from that state's level, along the level's own direction, where no fringe is seen;
   *  NaN where it is too large to be noise (specks, domains too small for the map). */
  plateauNoise(pixel: number, metallic: boolean): number {
    const z = metallic ? this.levels.metallic : this.levels.insulating;
    const noise = metallic ? this.levels.noiseMetallic : this.levels.noiseInsulating;
    const zi = this.signal.im === null ? 0 : z.im;
    const size = Math.hypot(z.re, zi) || 1;
    const im = this.signal.im === null ? 0 : this.signal.im[pixel];
    const off = (this.signal.re[pixel] * z.re + im * zi) / size - size;
    const variance = varianceAlong(noise, z.re / size, zi / size);
    return off * off < 25 * variance ? off : Number.NaN;
  }

  /** Into `out`: the signal of a pixel across the chord (0 on it) and the variance of its noise there; then the signal turned so that
   *  the two-state mixture at share u is real (its argument is what a fringe adds), real and imaginary part. */
  offChord(pixel: number, u: number, out: Float64Array): void {
    const { insulating: a, metallic: b, noiseInsulating, noiseMetallic } = this.levels;
    const re = this.signal.re[pixel];
    const im = this.signal.im === null ? 0 : this.signal.im[pixel];
    const variance =
      (1 - u) * varianceAlong(noiseInsulating, -this.ey, this.ex) + u * varianceAlong(noiseMetallic, -this.ey, this.ex);
    out[0] = -(re - a.re) * this.ey + (im - a.im) * this.ex;
    out[1] = Math.max(variance, 1e-12 * this.contrast * this.contrast);
    const zr = a.re + (b.re - a.re) * u;
    const zi = a.im + (b.im - a.im) * u;
    const size = Math.hypot(zr, zi) || 1;
    out[2] = (re * zr + im * zi) / size;
    out[3] = (im * zr - re * zi) / size;
  }
}
