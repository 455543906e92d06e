import type { Chord } from "./chord.js";
import type { Blur } from "./basis.js";
import type { Side } from "./sup_test.js";

/** Parameters of a fringe φ(x) = (a cos 2πx/Λ − b sin 2πx/Λ) e^{−x/ℓ}: a, b in rad, ln Λ and ln ℓ of nm. */
export const FRINGE_PARAMETERS = 4;

/** A fringe of any strength as the tip sees it: the signal (1 − u) z_I + u z_M times e^{iφ} on one side of the wall, blurred. Sums over a
 *  grid of sources with Gaussian weights, each half-line begun with half a weight (trapezoid rule, Euler–Maclaurin error
 *  h²/12 of the slope with h = σ/6). */
export class FringeForward {
  private readonly h: number;
  private readonly nodes: number;
  /** Component of the unblurred signal along the chord at each node. */
  private readonly along: Float64Array;
  private readonly phi: Float64Array;
  private readonly slopes: Float64Array[];

  constructor(
    private readonly side: Side,
    private readonly chord: Chord,
    private readonly blur: Blur,
    reachNm: number,
  ) {
    this.h = Math.max(0.5, blur.sigmaNm / 6);
    this.nodes = Math.ceil((reachNm + 5 * blur.sigmaNm) / this.h) + 2;
    const metallic = side === "metallic";
    const own = metallic ? chord.alongMetallic : chord.alongInsulating;
    const step = metallic ? -chord.length : chord.length;
    this.along = Float64Array.from({ length: this.nodes }, (_, k) => {
      const u = blur.wNm > 0 ? 0.5 * (1 + Math.tanh((k * this.h) / blur.wNm)) : 1;
      return own + step * (1 - u);
    });
    this.phi = new Float64Array(this.nodes);
    this.slopes = [0, 1, 2, 3].map(() => new Float64Array(this.nodes));
  }

  /** Sets the fringe; false where it makes no sense. */
  set(p: ArrayLike<number>, at: number): boolean {
    const [a, b] = [p[at], p[at + 1]];
    const period = Math.exp(p[at + 2]);
    const decay = Math.exp(p[at + 3]);
    if (!(period > 0 && decay > 0 && Number.isFinite(a) && Number.isFinite(b))) return false;
    for (let k = 0; k < this.nodes; k++) {
      const x = k * this.h;
      const theta = (2 * Math.PI * x) / period;
      const e = Math.exp(-x / decay);
      const c = e * Math.cos(theta);
      const s = e * Math.sin(theta);
      const phi = a * c - b * s;
      this.phi[k] = phi;
      this.slopes[0][k] = c;
      this.slopes[1][k] = -s;
      this.slopes[2][k] = theta * (a * s + b * c);
      this.slopes[3][k] = (phi * x) / decay;
    }
    return true;
  }

  /** The change that the fringe makes at distance `distanceNm` (signed, metallic positive): `out[0]` across the chord, `out[1]` along it; with
   *  `slopes`, `out[2 …]` the slopes of both by the four parameters, across first. */
  change(distanceNm: number, out: Float64Array, slopes: boolean): void {
    const { h, chord, along, phi } = this;
    const sigma = this.blur.sigmaNm;
    const x = this.side === "metallic" ? distanceNm : -distanceNm;
    out.fill(0);
    const first = Math.max(0, Math.ceil((x - 5 * sigma) / h));
    const last = Math.min(this.nodes - 1, Math.floor((x + 5 * sigma) / h));
    const norm = h / (sigma * Math.sqrt(2 * Math.PI));
    for (let k = first; k <= last; k++) {
      const z = (x - k * h) / sigma;
      const weight = norm * Math.exp(-0.5 * z * z) * (k === 0 ? 0.5 : 1);
      const sin = Math.sin(phi[k]);
      const cos = Math.cos(phi[k]);
      const lost = -2 * Math.sin(phi[k] / 2) ** 2;
      out[0] += weight * (along[k] * sin + chord.height * lost);
      out[1] += weight * (along[k] * lost - chord.height * sin);
      if (!slopes) continue;
      const across = weight * (along[k] * cos - chord.height * sin);
      const lengthwise = weight * (-along[k] * sin - chord.height * cos);
      for (let m = 0; m < FRINGE_PARAMETERS; m++) {
        out[2 + m] += across * this.slopes[m][k];
        out[6 + m] += lengthwise * this.slopes[m][k];
      }
    }
  }
}
