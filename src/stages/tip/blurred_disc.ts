import { besselI0e, besselI1e } from "./bessel.js";

/** Step of the table in σ. Cubic Hermite pieces between exact values and slopes: error below 5e-6 of the peak. */
const STEP = 0.15;
const REACH = 7;
/** Two-point Gauss–Legendre on a step. */
const GAUSS = [0.5 - Math.sqrt(3) / 6, 0.5 + Math.sqrt(3) / 6];

/** A uniform disc of radius R seen by a round Gaussian tip of standard deviation σ: D(r) = ∬_disc g(|r − ρ|; σ) d²ρ, 1 in the middle
 *  of a large disc. Its slopes are closed forms: ∂D/∂R = (R/σ²) e^{−(R−r)²/2σ²} I₀e(Rr/σ²), and by the divergence theorem
 *  ∂D/∂r = −(R/σ²) e^{−(R−r)²/2σ²} I₁e(Rr/σ²); D itself is summed from the far end; ∂D/∂σ follows from D's depending on ratios only. */
export class BlurredDisc {
  /** At the nodes: D, ∂D/∂r, ∂²D/∂r², ∂D/∂R, ∂²D/∂R∂r; slopes along r a step. */
  private readonly d: Float64Array;
  private readonly dr: Float64Array;
  private readonly drr: Float64Array;
  private readonly dR: Float64Array;
  private readonly dRr: Float64Array;
  private readonly h: number;
  private readonly last: number;
  /** D(0) = 1 − e^{−R²/2σ²}. */
  readonly peak: number;

  constructor(radius: number, sigma: number) {
    const h = STEP * sigma;
    const n = Math.ceil((radius + REACH * sigma) / h) + 1;
    this.h = h;
    this.last = n;
    this.d = new Float64Array(n + 1);
    this.dr = new Float64Array(n + 1);
    this.drr = new Float64Array(n + 1);
    this.dR = new Float64Array(n + 1);
    this.dRr = new Float64Array(n + 1);
    const scale = radius / (sigma * sigma);
    const weight = (r: number): number => {
      const z = (radius - r) / sigma;
      return z * z > 60 ? 0 : scale * Math.exp(-0.5 * z * z);
    };
    const slope = (r: number): number => {
      const w = weight(r);
      return w === 0 ? 0 : -w * besselI1e(scale * r);
    };
    for (let k = n - 1; k >= 0; k--) {
      this.d[k] = this.d[k + 1] - (slope((k + GAUSS[0]) * h) + slope((k + GAUSS[1]) * h)) * 0.5 * h;
      const r = k * h;
      const w = weight(r);
      if (w === 0) continue;
      const x = scale * r;
      const i0 = besselI0e(x);
      const i1 = besselI1e(x);
      const fall = r / (sigma * sigma);
      this.dr[k] = -w * i1 * h;
      this.drr[k] = -w * (scale * (i0 - (x > 1e-9 ? i1 / x : 0.5)) - fall * i1) * h * h;
      this.dR[k] = w * i0;
      this.dRr[k] = w * (scale * i1 - fall * i0) * h;
    }
    this.peak = -Math.expm1(-0.5 * radius * scale);
  }

  valueAt(r: number): number {
    return this.between(r, this.d, this.dr);
  }

  /** ∂D/∂r */
  slopeAt(r: number): number {
    return this.between(r, this.dr, this.drr) / this.h;
  }

  /** ∂D/∂R */
  byRadius(r: number): number {
    return this.between(r, this.dR, this.dRr);
  }

  /** Cubic Hermite interpolation. */
  private between(r: number, values: Float64Array, slopes: Float64Array): number {
    const x = r / this.h;
    const k = Math.floor(x);
    if (k >= this.last) return 0;
    const t = x - k;
    const s = 1 - t;
    const at = s * s * (1 + 2 * t) * values[k] + t * t * (1 + 2 * s) * values[k + 1];
    return at + s * t * (s * slopes[k] - t * slopes[k + 1]);
  }
}
