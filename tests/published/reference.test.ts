import { spawnSync } from "node:child_process";
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { parse } from "csv-parse/sync";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { findPython, pythonEnv } from "../../scripts/find_python.mjs";
import { analyse } from "../../src/analyse.js";
import { defaultSpec, generateStack } from "../../src/demo/index.js";
import { readCooldown } from "../../src/input/index.js";
import { settingsWith } from "../../src/settings.js";
import { openForWriting } from "../../src/store/open.js";
import { readTable, type Row } from "../../src/store/read.js";
import { saveAnalysis } from "../../src/store/save.js";
import { tableNamed, type ExportedTable } from "../../src/tables/columns.js";

/* Source: scripts/reference.py, the same job with NumPy, SciPy and scikit-image, other methods at every step (upsampled cross-
 * correlation against the first frame, Otsu's threshold, find_contours, map_coordinates, curve_fit). It knows nothing of the truth, and
 * neither does this test: two programs must agree. */
const python = findPython(["numpy", "scipy", "skimage", "tifffile", "yaml"]);
const skipped = "skipped: no Python with scipy, skimage, tifffile and yaml here";

describe.skipIf(python === null)(
  `two programs on the same files (${python === null ? skipped : "ours and SciPy's"})`,
  () => {
    const dir = mkdtempSync(path.join(tmpdir(), "coldseam-reference-"));
    const ours: Record<string, Row[]> = {};
    const theirs: Record<string, Record<string, string>[]> = {};

    beforeAll(async () => {
      const spec = defaultSpec({
        cooldown: "twice",
        rows: 144,
        cols: 144,
        seed: 61,
        series: [
          { branch: "cooling", temperaturesK: [185, 162, 156, 151, 147, 125] },
          { branch: "warming", temperaturesK: [127, 152, 158, 163, 169, 190] },
        ],
        drift: { stepSdNm: 30, jumpNm: 150, limitNm: 200 },
      });
      const yaml = generateStack(spec, path.join(dir, "cooldown"));
      const analysis = await analyse(await readCooldown(yaml), {
        settings: settingsWith(),
        programVersion: "test",
        workers: 0,
      });
      const db = openForWriting(path.join(dir, "ours.sqlite"));
      saveAnalysis(db, analysis, new Date(0));
      analysis.release?.();
      for (const name of ["temperature", "loops"]) ours[name] = [...readTable(db, tableNamed(name) as ExportedTable)];
      db.close();
      const r = spawnSync(python?.command ?? "", ["scripts/reference.py", yaml, path.join(dir, "theirs"), "1"], {
        encoding: "utf8",
        env: pythonEnv(),
      });
      if (r.status !== 0) throw new Error(r.stderr);
      for (const name of ["temperature", "loops"])
        theirs[name] = parse(readFileSync(path.join(dir, "theirs", `${name}.csv`)), { columns: true });
    });
    afterAll(() => rmSync(dir, { recursive: true, force: true }));

    /** Both values of a column, of the rows where both have one. */
    function both(table: string, column: string): (readonly [number, number])[] {
      expect(theirs[table]).toHaveLength(ours[table].length);
      return ours[table].flatMap((r, k) => {
        const other = theirs[table][k][column];
        return typeof r[column] === "number" && other !== "" ? [[r[column], Number(other)] as const] : [];
      });
    }

    test("every frame's place, to a fifth of a pixel of 10 nm: theirs carries the row noise of the first frame in all", () => {
      for (const axis of ["drift_x_nm", "drift_y_nm"]) {
        const pairs = both("temperature", axis);
        expect(pairs).toHaveLength(12);
        for (const [a, b] of pairs) expect(Math.abs(a - b)).toBeLessThan(2);
      }
    });

    test("every frame's metallic fraction, to 0.01: each leaves out its own debris", () => {
      const pairs = both("temperature", "metallic_fraction");
      expect(pairs).toHaveLength(12);
      for (const [a, b] of pairs) expect(Math.abs(a - b)).toBeLessThan(0.01);
    });

    test("median wall widths, to 8 % in a frame and 4 % over the frames", () => {
      const pairs = both("temperature", "wall_width_median_nm");
      expect(pairs.length).toBeGreaterThanOrEqual(5);
      const relative = pairs.map(([a, b]) => b / a - 1);
      for (const d of relative) expect(Math.abs(d)).toBeLessThan(0.08);
      expect(Math.abs(relative.reduce((s, d) => s + d, 0) / relative.length)).toBeLessThan(0.04);
    });

    test("half temperatures and the loop's width, to 0.3 K of steps of 4 to 6 K", () => {
      for (const column of ["cooling_half_K", "warming_half_K", "width_K"]) {
        const [[a, b]] = both("loops", column);
        expect(Math.abs(a - b)).toBeLessThan(0.3);
      }
    });
  },
);
