import { expect, test } from "vitest";
import { fuzz } from "../../src/study/fuzz.js";

test("500 spoilt cooldowns: refused in words or read soundly, in time and memory, whatever kind of file is spoilt", async () => {
  const report = await fuzz(0, 500, 20);
  expect(report.wrong).toEqual([]);
  expect(report.cases).toBe(500);
  for (const [kind, n] of report.byKind) {
    expect(n.errors + n.sound, kind).toBeGreaterThan(70);
    // A test that never reads anything, or never refuses anything, looks at nothing.
    expect(n.errors, kind).toBeGreaterThan(20);
    expect(n.sound, kind).toBeGreaterThan(2);
  }
  expect(report.slowestMs).toBeGreaterThan(0);
});
