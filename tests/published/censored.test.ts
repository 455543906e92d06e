import { describe, expect, it } from "vitest";
import {
  kaplanMeier,
  leftCensoredDistribution,
  leftCensoredMedian,
  medianSurvival,
} from "../../src/numerics/censored.js";
import { median } from "../../src/numerics/quantile.js";
import { turnbull } from "../../src/numerics/turnbull.js";
import { fixture } from "./fixture.js";

interface Case {
  name: string;
  source?: string;
  time?: number[];
  event?: number[];
  rows?: (number | null)[][];
  median?: number;
  width_nm?: number[];
  is_upper_limit?: number[];
  turnbull_mass?: [number, number][] | number[];
  wrong_ways?: Record<string, number>;
  intervals?: [number, number][];
  turnbull_cells?: [number, number][];
  log_likelihood?: number;
}
// Source: product-limit formula in rational arithmetic, R's survfit agrees; the data sets are named in the fixture.
const { cases } = fixture<{ cases: Case[] }>("censored");
const named = (start: string): Case => {
  const found = cases.find((c) => c.name.startsWith(start));
  if (!found) throw new Error(`no case "${start}"`);
  return found;
};

describe("censored values, against published tables and R", () => {
  it.each(["6-MP", "eight patients"])("Kaplan–Meier with Greenwood's error: %s", (start) => {
    const c = named(start);
    const steps = kaplanMeier(c.time ?? [], c.event ?? []);
    expect(steps).toHaveLength(c.rows?.length ?? -1);
    c.rows?.forEach(([time, atRisk, events, survival, se], i) => {
      expect(steps[i]).toMatchObject({ time, atRisk, events });
      expect(steps[i].survival).toBeCloseTo(survival ?? Number.NaN, 12);
      if (se === null) expect(steps[i].se).toBeNaN();
      else expect(steps[i].se).toBeCloseTo(se, 12);
    });
  });

  it("median: 23 weeks of the 6-MP patients, its 95 % limits as R gives them for log(−log)", () => {
    const c = named("6-MP");
    const m = medianSurvival(kaplanMeier(c.time ?? [], c.event ?? []));
    expect(m.median).toBe(c.median);
    // survfit(conf.type = "log-log"): 13, NA
    expect(m.low).toBe(13);
    expect(m.high).toBeNull();
  });

  it("left-censored wall widths: distribution, median, and what the wrong ways would say", () => {
    const c = named("ten wall widths");
    const widths = c.width_nm ?? [];
    const limits = c.is_upper_limit ?? [];
    const steps = leftCensoredDistribution(widths, limits);
    expect(steps).toHaveLength(c.rows?.length ?? -1);
    c.rows?.forEach(([value, below, se], i) => {
      expect(steps[i].value).toBe(value);
      expect(steps[i].below).toBeCloseTo(below ?? Number.NaN, 12);
      if (se !== null) expect(steps[i].se).toBeCloseTo(se, 12);
    });
    expect(leftCensoredMedian(widths, limits).median).toBe(c.median);
    expect(median(widths.filter((_, i) => !limits[i]))).toBe(c.wrong_ways?.["median_of_resolved_only"]);
    expect(median(widths)).toBe(c.wrong_ways?.["median_limits_taken_as_values"]);

    const fit = turnbull(
      widths.map((w, i) => (limits[i] ? 0 : w)),
      widths,
    );
    expect(fit.converged).toBe(true);
    expect(c.turnbull_mass).toHaveLength(fit.cells.length);
    c.turnbull_mass?.forEach((pair, i) => {
      const [width, mass] = Array.isArray(pair) ? pair : [Number.NaN, Number.NaN];
      expect(fit.cells[i]).toMatchObject({ low: width, high: width });
      expect(Math.abs(fit.cells[i].mass - mass)).toBeLessThan(1e-6);
    });
  });

  it("Turnbull's estimate of fifteen intervals", () => {
    const c = named("fifteen");
    const intervals = c.intervals ?? [];
    const fit = turnbull(
      intervals.map((v) => v[0]),
      intervals.map((v) => v[1]),
    );
    expect(fit.converged).toBe(true);
    expect(fit.cells.map((v) => [v.low, v.high])).toEqual(c.turnbull_cells);
    expect(c.turnbull_mass).toHaveLength(fit.cells.length);
    c.turnbull_mass?.forEach((mass, i) => expect(Math.abs(fit.cells[i].mass - Number(mass))).toBeLessThan(1e-5));
    expect(fit.logLikelihood).toBeCloseTo(c.log_likelihood ?? Number.NaN, 6);
  });
});
