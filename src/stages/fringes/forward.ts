import type { Chord } from "./chord.js";
import { shareAt, type Blur } from "./basis.js";
import type { Side } from "./sup_test.js";

/** Parameters of a fringe φ(x) = (a cos 2πx/Λ − b sin 2πx/Λ) e^{−x/ℓ}: a, b in rad, ln Λ and ln ℓ of nm. */
export const FRINGE_PARAMETERS = 4;

/** Standard deviations of the tip's response that are summed over. */
const REACH_SIGMAS = 5;

/** Which nodes are summed for each of many places, and their weights: made once for a profile, used for every trial of its fit. */
export interface Places {
  readonly count: number;
  /** First node and number of nodes of each place. */
  readonly first: Int32Array;
  readonly many: Int32Array;
  /** Weights of place k from k · `stride` on. */
  readonly weights: Float64Array;
  readonly stride: number;
}

/** A fringe of any strength as the tip sees it: the signal (1 − u) z_I + u z_M times e^{iφ} on one side of the wall, blurred. Sums over a
 *  grid of sources with Gaussian weights, each half-line begun with half a weight (trapezoid rule, Euler–Maclaurin error
 *  h²/12 of the slope with h = σ/6). One for a side of all walls of a frame; it holds one fringe at a time. */
export class FringeForward {
  private readonly h: number;
  private readonly nodes: number;
  /** Component of the unblurred signal along the chord at each node. */
  private readonly along: Float64Array;
  /** The fringe's cosine and sine at each node. */
  private readonly c: Float64Array;
  private readonly s: Float64Array;
  /** The change at each node before the blur, half of it at the first: across the chord, along it, and their slopes by φ. */
  private readonly across: Float64Array;
  private readonly lengthwise: Float64Array;
  private readonly acrossSlope: Float64Array;
  private readonly lengthwiseSlope: Float64Array;
  /** The tip's response at whole nodes. */
  private readonly kernel: Float64Array;
  /** What the two-state signal alone is along the chord at distances −3σ, −3σ + h, …, and how many nodes −3σ is. */
  private readonly plain: Float64Array;
  private readonly before: number;
  private readonly slopes: readonly Float64Array[];
  private readonly held = new Float64Array(FRINGE_PARAMETERS).fill(Number.NaN);

  constructor(
    private readonly side: Side,
    private readonly chord: Chord,
    readonly blur: Blur,
    reachNm: number,
  ) {
    const { sigmaNm, wNm } = blur;
    const h = Math.max(0.5, sigmaNm / 6);
    this.h = h;
    this.nodes = Math.ceil((reachNm + REACH_SIGMAS * sigmaNm) / h) + 2;
    const metallic = side === "metallic";
    const own = metallic ? chord.alongMetallic : chord.alongInsulating;
    const step = metallic ? -chord.length : chord.length;
    this.along = Float64Array.from({ length: this.nodes }, (_, k) => {
      const u = wNm > 0 ? 0.5 * (1 + Math.tanh((k * h) / wNm)) : 1;
      return own + step * (1 - u);
    });
    const array = (): Float64Array => new Float64Array(this.nodes);
    this.c = array();
    this.s = array();
    this.across = array();
    this.lengthwise = array();
    this.acrossSlope = array();
    this.lengthwiseSlope = array();
    this.slopes = Array.from({ length: FRINGE_PARAMETERS }, array);
    const taps = Math.floor((REACH_SIGMAS * sigmaNm) / h);
    const norm = h / (sigmaNm * Math.sqrt(2 * Math.PI));
    this.kernel = Float64Array.from({ length: taps + 1 }, (_, k) => norm * Math.exp(-0.5 * ((k * h) / sigmaNm) ** 2));
    this.before = Math.floor((3 * sigmaNm) / h);
    const scratch = new Float64Array(4);
    this.plain = Float64Array.from({ length: this.before + Math.floor(reachNm / h) + 1 }, (_, k) => {
      const u = shareAt((metallic ? 1 : -1) * (k - this.before) * h, blur, scratch);
      return (1 - u) * chord.alongInsulating + u * chord.alongMetallic;
    });
  }

  /** Weights for places at signed distances, metallic positive. */
  places(distanceNm: ArrayLike<number>): Places {
    const { h, nodes } = this;
    const sigma = this.blur.sigmaNm;
    const count = distanceNm.length;
    const stride = Math.floor((2 * REACH_SIGMAS * sigma) / h) + 2;
    const first = new Int32Array(count);
    const many = new Int32Array(count);
    const weights = new Float64Array(count * stride);
    const norm = h / (sigma * Math.sqrt(2 * Math.PI));
    const ratio = h / sigma;
    const bend = Math.exp(-ratio * ratio);
    for (let k = 0; k < count; k++) {
      const x = this.side === "metallic" ? distanceNm[k] : -distanceNm[k];
      const from = Math.max(0, Math.ceil((x - REACH_SIGMAS * sigma) / h));
      const to = Math.min(nodes - 1, Math.floor((x + REACH_SIGMAS * sigma) / h));
      first[k] = from;
      many[k] = Math.max(0, to - from + 1);
      // g(z + r) = g(z) e^{−zr − r²/2}, the factor itself falling by e^{−r²} a node.
      const z = (from * h - x) / sigma;
      let weight = norm * Math.exp(-0.5 * z * z);
      let factor = Math.exp(-ratio * (z + 0.5 * ratio));
      for (let t = 0; t < many[k]; t++) {
        weights[k * stride + t] = weight;
        weight *= factor;
        factor *= bend;
      }
    }
    return { count, first, many, weights, stride };
  }

  /** Sets the fringe; false where it makes no sense. */
  set(p: ArrayLike<number>, at: number): boolean {
    const { held, nodes, h, chord } = this;
    if (p[at] === held[0] && p[at + 1] === held[1] && p[at + 2] === held[2] && p[at + 3] === held[3]) return true;
    const a = p[at];
    const b = p[at + 1];
    const period = Math.exp(p[at + 2]);
    const decay = Math.exp(p[at + 3]);
    if (!(period > 0 && decay > 0 && Number.isFinite(a) && Number.isFinite(b))) return false;
    for (let m = 0; m < FRINGE_PARAMETERS; m++) held[m] = p[at + m];
    // e^{−x/ℓ + 2πix/Λ}, turned and shrunk from node to node.
    const shrink = Math.exp(-h / decay);
    const turn = (2 * Math.PI * h) / period;
    const re = shrink * Math.cos(turn);
    const im = shrink * Math.sin(turn);
    let c = 1;
    let s = 0;
    for (let k = 0; k < nodes; k++) {
      this.c[k] = c;
      this.s[k] = s;
      const phi = a * c - b * s;
      const sin = Math.sin(phi);
      const cos = Math.cos(phi);
      const half = k === 0 ? 0.5 : 1;
      this.across[k] = half * (this.along[k] * sin + chord.height * (cos - 1));
      this.lengthwise[k] = half * (this.along[k] * (cos - 1) - chord.height * sin);
      this.acrossSlope[k] = half * (this.along[k] * cos - chord.height * sin);
      this.lengthwiseSlope[k] = half * (-this.along[k] * sin - chord.height * cos);
      const next = c * re - s * im;
      s = c * im + s * re;
      c = next;
    }
    return true;
  }

  /** The change that the fringe makes across the chord at each place. */
  acrossAt(places: Places, out: Float64Array): void {
    sumAt(places, this.across, out, 1, 0);
  }

  /** The change along the chord. */
  lengthwiseAt(places: Places, out: Float64Array): void {
    sumAt(places, this.lengthwise, out, 1, 0);
  }

  /** Slopes of the change across the chord by the first `parameters` parameters, row-major [places, parameters]. */
  acrossSlopesAt(places: Places, parameters: number, out: Float64Array): void {
    this.setSlopes(this.acrossSlope, parameters);
    for (let m = 0; m < parameters; m++) sumAt(places, this.slopes[m], out, parameters, m);
  }

  /** Slopes of the change along the chord. */
  lengthwiseSlopesAt(places: Places, parameters: number, out: Float64Array): void {
    this.setSlopes(this.lengthwiseSlope, parameters);
    for (let m = 0; m < parameters; m++) sumAt(places, this.slopes[m], out, parameters, m);
  }

  private setSlopes(byPhi: Float64Array, parameters: number): void {
    const { c, s, h, slopes } = this;
    const [a, b] = this.held;
    const wave = (2 * Math.PI * h) / Math.exp(this.held[2]);
    const fall = h / Math.exp(this.held[3]);
    for (let k = 0; k < this.nodes; k++) {
      slopes[0][k] = byPhi[k] * c[k];
      slopes[1][k] = -byPhi[k] * s[k];
      if (parameters < FRINGE_PARAMETERS) continue;
      slopes[2][k] = byPhi[k] * wave * k * (a * s[k] + b * c[k]);
      slopes[3][k] = byPhi[k] * fall * k * (a * c[k] - b * s[k]);
    }
  }

  /** Largest departure of the optical phase from that of the two-state step alone, as the tip sees both, up to `reachNm` from the wall; rad,
   *  and the signed distance (metallic positive) at which it is reached. */
  largestDeparture(reachNm: number): { readonly rad: number; readonly distanceNm: number } {
    const { h, before, plain, chord } = this;
    const steps = Math.min(plain.length - 1, before + Math.max(1, Math.floor(reachNm / h)));
    const values = new Float64Array(steps + 1);
    for (let k = 0; k <= steps; k++) {
      const across = this.onGrid(this.across, k - before);
      const lengthwise = this.onGrid(this.lengthwise, k - before);
      const along = plain[k];
      // arg of the one over the other
      values[k] = Math.atan2(
        (chord.height + across) * along - chord.height * (along + lengthwise),
        along * (along + lengthwise) + chord.height * (chord.height + across),
      );
    }
    let best = 0;
    for (let k = 1; k <= steps; k++) if (Math.abs(values[k]) > Math.abs(values[best])) best = k;
    let shift = 0;
    if (best > 0 && best < steps) {
      const bend = values[best - 1] - 2 * values[best] + values[best + 1];
      if (bend !== 0) shift = Math.max(-0.5, Math.min(0.5, (0.5 * (values[best - 1] - values[best + 1])) / bend));
    }
    const sign = this.side === "metallic" ? 1 : -1;
    return { rad: values[best], distanceNm: sign * (best + shift - before) * h };
  }

  private onGrid(source: Float64Array, at: number): number {
    const { kernel, nodes } = this;
    const first = Math.max(0, at - kernel.length + 1);
    const last = Math.min(nodes - 1, at + kernel.length - 1);
    let sum = 0;
    for (let k = first; k <= last; k++) sum += kernel[Math.abs(k - at)] * source[k];
    return sum;
  }
}

/** Weighted sums of a source at all places into every `stride`-th entry of `out`, from `offset` on. */
function sumAt(places: Places, source: Float64Array, out: Float64Array, stride: number, offset: number): void {
  const { count, first, many, weights } = places;
  for (let k = 0; k < count; k++) {
    const w = k * places.stride;
    const from = first[k];
    const n = many[k];
    let sum = 0;
    for (let t = 0; t < n; t++) sum += weights[w + t] * source[from + t];
    out[k * stride + offset] = sum;
  }
}
