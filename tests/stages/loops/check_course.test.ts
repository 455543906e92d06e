import { expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { checkCourse, settings, type LoopRow } from "../../../src/stages/loops/index.js";

const s = defaultsOf(settings);
const row = (temperatureK: number, value: number | null, sd = 0.01, cycle = 1): LoopRow => ({
  cycle,
  branch: "cooling",
  temperatureK,
  fraction: value === null ? null : { value, low: value - 1.96 * sd, high: value + 1.96 * sd },
});
const said = (rows: readonly LoopRow[]): string[] => checkCourse(rows, s).map((n) => n.message);

test("both branches in one series are warned of, with the worst place", () => {
  const rows = [
    row(150, 0.1),
    row(155, 0.31),
    row(155.5, 0.05),
    row(158, 0.6),
    row(158.5, 0.4),
    row(165, 1),
    row(160, null),
  ];
  expect(said(rows)).toEqual([
    "the fraction does not rise with temperature along cooling: 0.31 at 155 K, 0.05 at 155.5 K, and 1 more such pair: are both branches in one series?",
  ]);
  expect(said([row(150, 0.1), row(150, 0.9), row(151, 0.91)])).toEqual([
    "the fraction does not rise with temperature along cooling: 0.90 and 0.10, both at 150 K: are both branches in one series?",
  ]);
  expect(said([...rows, row(150, 0.5, 0.01, 2)])[0]).toMatch(/along cooling of cycle 1: /);
});

test("what falls within its error or by little is not, nor is a second cycle elsewhere", () => {
  expect(said([row(150, 0.31, 0.05), row(151, 0.05, 0.05)])).toEqual([]);
  expect(said([row(150, 0.31, 0.001), row(151, 0.27, 0.001)])).toEqual([]);
  expect(said([row(150, 0.9), row(151, 0.1, 0.01, 2)])).toEqual([]);
  const random = makeRandom(5);
  const noisy = Array.from({ length: 20_000 }, (_, k) => row(k, 0.5 + 0.02 * random.normal(), 0.02));
  expect(said(noisy)).toEqual([]);
});
