import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterEach, beforeEach, expect, test } from "vitest";
import type { Analysis } from "../../src/model/analysis.js";
import { planRemoval, remove } from "../../src/store/forget.js";
import { mergeInto, openSource } from "../../src/store/merge.js";
import { openForWriting, type Db } from "../../src/store/open.js";
import {
  hasPictures,
  readAnalysisInfo,
  readDriftPairs,
  readFringeBins,
  readPreview,
  readProfileBins,
  readWalls,
} from "../../src/store/pictures.js";
import { saveAnalysis } from "../../src/store/save.js";
import { verifyDatabase } from "../../src/store/verify.js";
import { sampleAnalysis } from "./sample_analysis.js";

let dir: string;
let db: Db;
beforeEach(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-pictures-"));
  db = openForWriting(path.join(dir, "lab.sqlite"));
});
afterEach(() => {
  db.close();
  rmSync(dir, { recursive: true, force: true });
});

/** The hand-made analysis with a picture of everything. */
function pictured(): Analysis {
  const a = sampleAnalysis();
  const [first, ...rest] = a.frames;
  const preview = {
    channel: "phase" as const,
    rows: 2,
    cols: 3,
    stepX: 1,
    stepY: 1,
    low: -0.5,
    high: 0.75,
    image: Uint8Array.of(0x52, 0x49, 0x46, 0x46, 7, 0, 9),
  };
  return {
    ...a,
    frames: [
      {
        ...first,
        previews: [preview],
        profileBins: [
          { wall: 0, profile: 0, wNm: 38.5, sigmaNm: 12.75, bins: Float32Array.of(-10, 0.25, 0.125, 10, 0.75, 0.0625) },
          { wall: 0, profile: 1, wNm: 0, sigmaNm: 12.75, bins: Float32Array.of(-10, Number.NaN, 0.125) },
        ],
        fringes: first.fringes.map((t) => ({
          ...t,
          drawn: { metallic: { re: 1.5, im: 0.5 }, bins: Float32Array.of(5, 1, 0.5, 0.25, 2, 1, 3, 1.5) },
        })),
      },
      ...rest,
    ],
    driftPairs: [{ reference: 0, moving: 1, xNm: 12.5, yNm: -3.25, sdXNm: 0.5, sdYNm: 0.75, used: false }],
  };
}

function expectPictures(from: Db, id: number): void {
  expect(hasPictures(from, id)).toBe(true);
  const p = readPreview(from, id, 0, "phase");
  expect(p).toMatchObject({ rows: 2, cols: 3, step_x: 1, step_y: 1, low: -0.5, high: 0.75 });
  expect(Array.from(p?.image ?? [])).toEqual([0x52, 0x49, 0x46, 0x46, 7, 0, 9]);
  expect(readPreview(from, id, 0, "amplitude")).toBeNull();
  const b = readProfileBins(from, id, 0, 0, 0);
  expect(b).toMatchObject({ wNm: 38.5, sigmaNm: 12.75 });
  expect(Array.from(b?.bins ?? [])).toEqual([-10, 0.25, 0.125, 10, 0.75, 0.0625]);
  // what is no number is no picture
  expect(readProfileBins(from, id, 0, 0, 1)).toBeNull();
  const f = readFringeBins(from, id, 0, 0, 0);
  expect(f).toMatchObject({ metallicRe: 1.5, metallicIm: 0.5 });
  expect(Array.from(f?.bins ?? [])).toEqual([5, 1, 0.5, 0.25, 2, 1, 3, 1.5]);
  expect(readDriftPairs(from, id)).toEqual([
    { reference: 0, moving: 1, x_nm: 12.5, y_nm: -3.25, sd_x_nm: 0.5, sd_y_nm: 0.75, used: 0 },
  ]);
  expect(readWalls(from, id, 0).map((w) => [w.wall, w.closed, Array.from(w.points)])).toEqual([
    [0, false, [0, 0, 96, 72]],
  ]);
}

test("what figures need comes back as it was saved", () => {
  const { id } = saveAnalysis(db, pictured(), new Date(0));
  expectPictures(db, id);
  expect(readAnalysisInfo(db, id)).toMatchObject({
    cooldown: "hand-made",
    sample: "KV-14",
    pixelXNm: 10,
    pixelYNm: 12,
    tipResolutionNm: 30,
  });
  expect(readAnalysisInfo(db, id + 1)).toBeNull();
  expect([...verifyDatabase(db)].flatMap((c) => c.problems)).toEqual([]);
});

test("an analysis without pictures is stored as before, and says that it has none", () => {
  const { id } = saveAnalysis(db, sampleAnalysis(), new Date(0));
  expect(hasPictures(db, id)).toBe(false);
  expect(readProfileBins(db, id, 0, 0, 0)).toBeNull();
  expect(readDriftPairs(db, id)).toEqual([]);
});

test("pictures go with their analysis where it is merged, and go where it is forgotten", async () => {
  saveAnalysis(db, pictured(), new Date(0));
  const file = path.join(dir, "both.sqlite");
  const both = openForWriting(file);
  saveAnalysis(both, sampleAnalysis({ name: "other", images: "b" }), new Date(0));
  const source = await openSource(db.name);
  const [merged] = mergeInto(both, [source]);
  source.close();
  expect(merged.now).not.toBe(merged.was);
  expectPictures(both, merged.now);
  remove(both, planRemoval(both, "hand-made", null));
  for (const table of ["preview", "profile_bins", "fringe_bins", "drift_pair"])
    expect(both.prepare(`SELECT count(*) FROM ${table}`).pluck().get()).toBe(0);
  both.close();
});

test("a picture of a frame that is not there is refused, and the analysis with it", () => {
  const a = pictured();
  const lost = { ...a, driftPairs: [{ reference: 0, moving: 9, xNm: 0, yNm: 0, sdXNm: 0, sdYNm: 0, used: true }] };
  expect(() => saveAnalysis(db, lost, new Date(0))).toThrow(/FOREIGN KEY/);
  expect(db.prepare("SELECT count(*) FROM analysis").pluck().get()).toBe(0);
});
