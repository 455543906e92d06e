import { describe, expect, it } from "vitest";
import { FWHM_PER_SIGMA, RISE_PER_SIGMA, RISE_PER_W } from "../../src/model/units.js";
import {
  KINK_VARIANCE,
  apparentWidth,
  apparentWidthWithSlopes,
  kinkWidthFromApparent,
} from "../../src/numerics/kink.js";
import { fixture } from "./fixture.js";

interface Inverse {
  tip_fwhm_nm: number;
  apparent_10_90_nm: number;
  w_nm: number;
  intrinsic_10_90_nm: number;
  d_intrinsic_d_apparent: number;
  d_intrinsic_d_tip_fwhm: number;
  intrinsic_sd_nm_from_tip_sd_3_nm_alone: number;
  by_quadrature_nm: number;
}
// Source: root finding on 22-digit quadrature (mpmath).
const table = fixture<{ constants: Record<string, number>; rows: number[][]; inverse: Inverse[] }>("width_table");
// Source: JCGM 100:2008 applied to one wall.
const budget = fixture<{
  tip_fwhm_nm: [number, number];
  apparent_10_90_nm: [number, number];
  pixel_scale_relative_sd: number;
  intrinsic_10_90_nm: number;
  rows: [string, number, number, number][];
  combined_standard_uncertainty_nm: number;
  share_of_variance: number[];
  expanded_k2_nm: number;
}>("budget");

const near = (value: number, expected: number, relative = 1e-9): void =>
  expect(Math.abs(value - expected)).toBeLessThanOrEqual(relative * Math.max(1e-3, Math.abs(expected)));

describe("10–90 % widths, against 22-digit root finding", () => {
  it("constants of the profiles", () => {
    near(RISE_PER_W, table.constants["tanh_10_90_over_w"], 1e-14);
    near(RISE_PER_SIGMA, table.constants["erf_10_90_over_sigma"], 1e-14);
    near(FWHM_PER_SIGMA, table.constants["fwhm_over_sigma"], 1e-14);
    near(RISE_PER_SIGMA / FWHM_PER_SIGMA, table.constants["erf_10_90_over_fwhm"], 1e-14);
    near(Math.SQRT2 * RISE_PER_W, table.constants["gl_kink_tanh_x_over_sqrt2_xi_10_90_over_xi"], 1e-14);
    near(KINK_VARIANCE, table.constants["sech2_line_spread_variance_over_w2"], 1e-14);
  });

  it("apparent width and its slopes, from 0 to 50 σ", () => {
    for (const [w, intrinsic, apparent, byW, bySigma, difference] of table.rows) {
      const a = apparentWidthWithSlopes(w, 1);
      near(w * RISE_PER_W, intrinsic);
      near(a.width, apparent);
      near(a.byW, byW);
      near(a.bySigma, bySigma);
      near(apparentWidth(30 * w, 30), 30 * apparent);
      // Subtracting the tip in quadrature is too wide by up to 5.8 %.
      near(a.width ** 2 - RISE_PER_SIGMA ** 2, difference ** 2);
    }
  });

  it("the inverse problem: from apparent width and tip to the wall, with both sensitivities", () => {
    expect(table.inverse).toHaveLength(10);
    for (const p of table.inverse) {
      const sigma = p.tip_fwhm_nm / FWHM_PER_SIGMA;
      const w = kinkWidthFromApparent(p.apparent_10_90_nm, sigma);
      near(w, p.w_nm);
      near(w * RISE_PER_W, p.intrinsic_10_90_nm);
      const a = apparentWidthWithSlopes(w, sigma);
      near(RISE_PER_W / a.byW, p.d_intrinsic_d_apparent);
      const byTip = (-RISE_PER_W * a.bySigma) / a.byW / FWHM_PER_SIGMA;
      near(byTip, p.d_intrinsic_d_tip_fwhm);
      near(3 * Math.abs(byTip), p.intrinsic_sd_nm_from_tip_sd_3_nm_alone);
    }
  });

  it("an uncertainty budget after the GUM", () => {
    const [tip, tipSd] = budget.tip_fwhm_nm;
    const [apparent, apparentSd] = budget.apparent_10_90_nm;
    const sigma = tip / FWHM_PER_SIGMA;
    const w = kinkWidthFromApparent(apparent, sigma);
    near(w * RISE_PER_W, budget.intrinsic_10_90_nm);
    const a = apparentWidthWithSlopes(w, sigma);
    const sensitivities = [
      RISE_PER_W / a.byW,
      (-RISE_PER_W * a.bySigma) / a.byW / FWHM_PER_SIGMA,
      (apparent * RISE_PER_W) / a.byW,
    ];
    const parts = [apparentSd, tipSd, budget.pixel_scale_relative_sd].map((sd, i) => sd * Math.abs(sensitivities[i]));
    const combined = Math.hypot(...parts);
    budget.rows.forEach(([, , sensitivity, contribution], i) => {
      near(sensitivities[i], sensitivity);
      near(parts[i], contribution);
      near((parts[i] / combined) ** 2, budget.share_of_variance[i]);
    });
    near(combined, budget.combined_standard_uncertainty_nm);
    near(2 * combined, budget.expanded_k2_nm);
  });
});
