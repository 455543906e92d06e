import { describe, expect, it } from "vitest";
import { fastKink, kink } from "../../src/numerics/kink.js";
import { fixture } from "./fixture.js";

// Source: 25-digit quadrature (mpmath), columns w, x, u, 1 − u, u_x, u_w, u_σ at σ = 1.
const { rows } = fixture<{ rows: [number, number, number, number, number, number, number][] }>("tanh_gauss_profile");
const out = new Float64Array(4);

describe("kink through a Gaussian, against 25-digit quadrature", () => {
  it("value, both tails and derivatives to 1e-12, in any unit of length", () => {
    expect(rows.length).toBeGreaterThan(80);
    for (const unit of [1, 12.7, 1e-9]) {
      for (const [w, x, u, tail, ux, uw, us] of rows) {
        kink(x * unit, w * unit, unit, out);
        expect(Math.abs(out[0] - u)).toBeLessThan(1e-12);
        expect(Math.abs(out[1] * unit - ux)).toBeLessThan(1e-12);
        expect(Math.abs(2 * w * out[2] * unit * unit - uw)).toBeLessThan(1e-12);
        expect(Math.abs(out[3] * unit - us)).toBeLessThan(1e-12);
        kink(-x * unit, w * unit, unit, out);
        expect(Math.abs(out[0] - tail)).toBeLessThan(1e-12);
      }
    }
  });

  it("the tabulated form to 1e-7 in value and 3e-6 in its derivatives", () => {
    for (const [w, x, u, tail, ux, uw, us] of rows) {
      fastKink(x, w, 1, out);
      expect(Math.abs(out[0] - u)).toBeLessThan(1e-7);
      expect(Math.abs(out[1] - ux)).toBeLessThan(3e-6);
      expect(Math.abs(2 * w * out[2] - uw)).toBeLessThan(3e-6);
      expect(Math.abs(out[3] - us)).toBeLessThan(3e-6);
      fastKink(-x, w, 1, out);
      expect(Math.abs(out[0] - tail)).toBeLessThan(1e-7);
    }
  });
});
