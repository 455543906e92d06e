import { describe, expect, it } from "vitest";
import { benjaminiHochberg, benjaminiYekutieli } from "../../src/numerics/false_discovery.js";
import { fixture } from "./fixture.js";

// Source: the worked example of Benjamini & Hochberg 1995; R's p.adjust agrees.
const d = fixture<{
  example_1995: {
    p: number[];
    q: number;
    rejected: number;
    adjusted: number[];
    adjusted_benjamini_yekutieli: number[];
  };
  unsorted_with_ties: { p: number[]; adjusted: number[]; "rejected_at_0.05": boolean[]; "rejected_at_0.1": boolean[] };
}>("benjamini_hochberg");

const equal = (a: Float64Array, b: number[]): void => {
  expect(a).toHaveLength(b.length);
  b.forEach((v, i) => expect(Math.abs(a[i] - v)).toBeLessThan(1e-12));
};

describe("false discovery rate, against the 1995 paper", () => {
  it("adjusts its fifteen p-values and rejects four", () => {
    const e = d.example_1995;
    const adjusted = benjaminiHochberg(e.p);
    equal(adjusted, e.adjusted);
    expect(adjusted.filter((v) => v <= e.q)).toHaveLength(e.rejected);
    equal(benjaminiYekutieli(e.p), e.adjusted_benjamini_yekutieli);
  });

  it("keeps the order given, ties too", () => {
    const e = d.unsorted_with_ties;
    const adjusted = benjaminiHochberg(e.p);
    equal(adjusted, e.adjusted);
    expect(Array.from(adjusted, (v) => v <= 0.05)).toEqual(e["rejected_at_0.05"]);
    expect(Array.from(adjusted, (v) => v <= 0.1)).toEqual(e["rejected_at_0.1"]);
  });
});
