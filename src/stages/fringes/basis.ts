import { dampedOscillation } from "../../numerics/fringe_profile.js";
import { fastKink } from "../../numerics/kink.js";
import type { Chord } from "./chord.js";

/** What the tip makes of a wall and of oscillations beside it. */
export interface Blur {
  /** Width of the wall's intrinsic profile ½(1 + tanh(x/w)), nm. */
  readonly wNm: number;
  /** Standard deviation of the tip's response, the averaging over a bin included, nm. */
  readonly sigmaNm: number;
}

export interface Member {
  readonly periodNm: number;
  readonly decayNm: number;
}

/** Share of the metallic signal at distance x, as seen. */
export function shareAt(xNm: number, blur: Blur, scratch: Float64Array): number {
  fastKink(xNm, blur.wNm, blur.sigmaNm, scratch);
  return scratch[0];
}

/** The response across the chord to a fringe of 1 rad on one side of a wall, in the limit of a small one: Im[i z f · conj(e)] =
 *  (z · e) f with z = (1 − u) z_I + u z_M the signal before the blur and f = H(x) cos(2πx/Λ) e^{−x/ℓ} (or the sine), blurred by the tip. On the
 *  fringe's side (x > 0) z · e is that of the side's own level plus (1 − u) times the step to the other one:
 *  own + step (1 − u). Tabulated on a fine grid, to be read by linear interpolation. */
export class FringeTable {
  readonly fromNm: number;
  readonly stepNm: number;
  /** Per member four rows: blurred cos, sin, (1 − u) cos, (1 − u) sin. */
  private readonly rows: Float64Array[] = [];

  constructor(
    readonly members: readonly Member[],
    readonly blur: Blur,
    reachNm: number,
  ) {
    // A quarter of σ: the search needs a percent, the fit has its own sums.
    const h = Math.max(0.5, blur.sigmaNm / 4);
    const taps = Math.ceil((5 * blur.sigmaNm) / h);
    const n = Math.ceil(reachNm / h) + taps + 2;
    this.stepNm = h;
    this.fromNm = -taps * h;
    const kernel = Float64Array.from({ length: 2 * taps + 1 }, (_, t) =>
      Math.exp(-0.5 * (((t - taps) * h) / blur.sigmaNm) ** 2),
    );
    const norm = kernel.reduce((a, v) => a + v, 0);
    // ½ − (1 − u) = ½ tanh(x/w) begins at 0, so that the sums over the grid meet no jump; the jump itself goes in closed form.
    const lift = Float64Array.from({ length: n + taps }, (_, k) =>
      blur.wNm > 0 ? 0.5 * Math.tanh((k * h) / blur.wNm) : k === 0 ? 0.25 : 0.5,
    );
    const out = new Float64Array(2);
    const rc = new Float64Array(n + taps);
    const rs = new Float64Array(n + taps);
    for (const m of members) {
      for (let k = 0; k < rc.length; k++) {
        const e = Math.exp((-k * h) / m.decayNm) * lift[k];
        const a = (2 * Math.PI * k * h) / m.periodNm;
        rc[k] = e * Math.cos(a);
        rs[k] = e * Math.sin(a);
      }
      const four = [0, 1, 2, 3].map(() => new Float64Array(n + taps));
      for (let q = 0; q < n + taps; q++) {
        dampedOscillation(this.fromNm + q * h, m.periodNm, m.decayNm, blur.sigmaNm, out);
        // Grid point q lies at q − taps; sources lie at 0 … .
        let c = 0;
        let s = 0;
        const first = Math.max(0, q - 2 * taps);
        const last = Math.min(rc.length - 1, q);
        for (let k = first; k <= last; k++) {
          const w = kernel[q - k];
          c += w * rc[k];
          s += w * rs[k];
        }
        four[0][q] = out[0];
        four[1][q] = out[1];
        four[2][q] = 0.5 * out[0] - c / norm;
        four[3][q] = 0.5 * out[1] - s / norm;
      }
      this.rows.push(...four);
    }
  }

  /** Points of the grid, `stepNm` apart from `fromNm` on. */
  get gridPoints(): number {
    return this.rows[0].length;
  }

  /** The response to a fringe on a side, its cosine (part 0) or sine (1), at the points of the grid, distances counted into that side. */
  responseOnGrid(member: number, part: number, metallicSide: boolean, chord: Chord): Float64Array {
    const own = metallicSide ? chord.alongMetallic : chord.alongInsulating;
    const step = metallicSide ? -chord.length : chord.length;
    const plain = this.rows[4 * member + part];
    const mixed = this.rows[4 * member + 2 + part];
    return plain.map((v, q) => own * v + step * mixed[q]);
  }
}

/** Tables made before: walls of one film are alike from frame to frame. */
const made = new Map<string, FringeTable>();
const TABLES_KEPT = 6;

/** A table for these periods and decays; the wall's width is rounded to 3 %, which no search can feel, so that tables can be used again. */
export function fringeTable(members: readonly Member[], blur: Blur, reachNm: number): FringeTable {
  const wNm = blur.wNm > 0 ? Math.exp(Math.round(Math.log(blur.wNm) / 0.03) * 0.03) : 0;
  const key = JSON.stringify([members, wNm, blur.sigmaNm, reachNm]);
  let table = made.get(key);
  if (table === undefined) {
    const oldest = made.keys().next().value;
    if (made.size >= TABLES_KEPT && oldest !== undefined) made.delete(oldest);
    made.set(key, (table = new FringeTable(members, { wNm, sigmaNm: blur.sigmaNm }, reachNm)));
  }
  return table;
}
