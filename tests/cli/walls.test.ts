import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, expect, test } from "vitest";
import type { Analysis, FrameResult } from "../../src/model/analysis.js";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { madeDatabase } from "./made.js";
import { coldseam } from "./program.js";

let dir: string;
let db: string;

/** As the stages leave it where no tip's resolution is known: six profiles as seen, one of them flagged, no width of its own. */
function withoutTip(): Analysis {
  const a = sampleAnalysis({ name: "bare", images: "b" });
  const f = a.frames[0] as FrameResult;
  const profiles = [91, 95, 99, 103, 107, 900].map((apparentWidthNm, profile) => ({
    ...f.profiles[0],
    profile,
    arcNm: 20 * profile,
    widthNm: null,
    widthSdNm: null,
    widthSdTipNm: null,
    widthUpper95Nm: apparentWidthNm + 5,
    resolved: false,
    apparentWidthNm,
    flag: profile === 5 ? ("poor-fit" as const) : ("" as const),
  }));
  const widths = { profiles: 5, medianNm: null, medianLowNm: null, medianHighNm: null, unresolvedShare: 1 };
  return { ...a, cooldown: { ...a.cooldown, tip: null }, frames: [{ ...f, profiles, widths }, ...a.frames.slice(1)] };
}

beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-walls-"));
  db = madeDatabase(path.join(dir, "lab.sqlite"), sampleAnalysis(), withoutTip());
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

test("without a tip's resolution the apparent widths are shown, and said to be that", () => {
  const { out } = coldseam("walls", "--db", db, "--cooldown", "bare");
  expect(out).toMatch(/median apparent width \/ nm {2}middle half/);
  expect(out).toMatch(/ 5 +99\.0 {2}95\.0 to 103\.0\n/);
  expect(out).toContain("tip.resolution_nm");
  expect(out).not.toMatch(/intrinsic 10-90|100 %/);
  expect(Math.max(...out.split("\n").map((l) => l.length))).toBeLessThanOrEqual(80);
});

test("beside one with a tip each block has its own head, and its own words below", () => {
  const { out } = coldseam("walls", "--db", db);
  expect(out.match(/median width \/ nm/g)).toHaveLength(1);
  expect(out.match(/median apparent width \/ nm/g)).toHaveLength(1);
  expect(out).toMatch(/ 84\.[23] {2}80\.0 to 88\.0 +50 %\n/);
  expect(out).toContain("Widths are intrinsic");
  expect(out).toContain("Apparent widths are");
});

test("as JSON they have columns of their own, empty where there is a tip", () => {
  const rows = JSON.parse(coldseam("walls", "--db", db, "--format", "json").out) as Record<string, unknown>[];
  expect(rows.map((r) => [r["cooldown"], r["wall_width_median_nm"], r["apparent_width_median_nm"]])).toEqual([
    ["bare", null, 99],
    ["hand-made", 84.25, null],
  ]);
  expect(rows[0]).toMatchObject({ apparent_width_lower_quartile_nm: 95, apparent_width_upper_quartile_nm: 103 });
});
