import { existsSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { parse } from "csv-parse/sync";
import sharp from "sharp";
import { afterAll, beforeAll, describe, expect, test, vi } from "vitest";
import { analyse } from "../../src/analyse.js";
import { figure, type FigureCommandOptions } from "../../src/cli/figure.js";
import { FIGURE_KINDS } from "../../src/cli/figure_data.js";
import { hasFont } from "../../src/cli/figure_images.js";
import { demoSpecs, generateStack } from "../../src/demo/index.js";
import { readCooldown } from "../../src/input/index.js";
import { InputError, UsageError } from "../../src/model/errors.js";
import { settingsWith } from "../../src/settings.js";
import { openForReading, openForWriting, type Db } from "../../src/store/open.js";
import { readTable, type Row } from "../../src/store/read.js";
import { saveAnalysis } from "../../src/store/save.js";
import { TABLES } from "../../src/tables/columns.js";
import { elementsWith } from "../figures/drawing.js";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { coldseam } from "./program.js";

let dir: string;
let db: string;

/** A small cooldown with fringes through the real pipeline, and a hand-made one without pictures. */
beforeAll(async () => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-figure-"));
  db = path.join(dir, "lab.sqlite");
  vi.spyOn(process.stderr, "write").mockReturnValue(true);
  const [spec] = demoSpecs({ size: "small" });
  const series = [
    { branch: "cooling", temperaturesK: [165, 157, 152, 146] },
    { branch: "warming", temperaturesK: [148, 158, 162, 170] },
  ] as const;
  const yaml = generateStack({ ...spec, rows: 88, cols: 96, series }, path.join(dir, "run"));
  const analysis = await analyse(await readCooldown(yaml), {
    settings: settingsWith(["fringes.draws=199"]),
    programVersion: "test",
    workers: 0,
  });
  const handle = openForWriting(db);
  saveAnalysis(handle, analysis, new Date(0));
  analysis.release?.();
  saveAnalysis(handle, sampleAnalysis({ name: "kept-no-pictures" }), new Date(0));
  handle.close();
}, 120_000);
afterAll(() => {
  vi.restoreAllMocks();
  rmSync(dir, { recursive: true, force: true });
});

const out = (name: string): string => path.join(dir, name);
async function svgOf(kind: string, o: Partial<FigureCommandOptions> = {}): Promise<string> {
  await figure(kind, { db, cooldown: ["kv14-run1"], out: out("figure.svg"), ...o });
  return readFileSync(out("figure.svg"), "utf8");
}

function rows(table: string): Row[] {
  const handle: Db = openForReading(db);
  try {
    const t = TABLES.find((c) => c.name === table);
    if (t === undefined) throw new Error(table);
    return [...readTable(handle, t, { cooldowns: ["kv14-run1"] })];
  } finally {
    handle.close();
  }
}

test.each(FIGURE_KINDS)("%s: drawn from the database as SVG and as PNG, with its numbers beside it", async (kind) => {
  const svg = await svgOf(kind, { data: out("figure.csv") });
  expect(svg).toContain('width="86mm"');
  expect(svg.replace(/base64,[^"]*/g, "")).not.toMatch(/NaN|undefined|Infinity|"null"/);
  const [head, ...lines] = parse(readFileSync(out("figure.csv"), "utf8"));
  expect(lines.length).toBeGreaterThan(3);
  for (const l of lines) expect(l.length).toBe(head.length);
  await figure(kind, {
    db,
    cooldown: ["kv14-run1"],
    out: out("figure.png"),
    widthMm: "60",
    dpi: "150",
    style: "screen",
  });
  const png = await sharp(out("figure.png")).metadata();
  expect(Math.abs((png.width ?? 0) - (60 / 25.4) * 150)).toBeLessThan(1);
  expect(png.density).toBe(150);
  expect(existsSync(out("figure.svg.part"))).toBe(false);
});

describe("the numbers in the figures are those of the tables", () => {
  test("loop", async () => {
    const points = elementsWith(await svgOf("loop"), "data-fraction");
    const found = points.map((e) => [
      Number(e["data-frame"]),
      Number(e["data-fraction"]),
      Number(e["data-low"]),
      Number(e["data-high"]),
    ]);
    expect(found.sort((a, b) => a[0] - b[0])).toEqual(
      rows("temperature").map((r) => [
        r["frame"],
        r["metallic_fraction"],
        r["metallic_fraction_low"],
        r["metallic_fraction_high"],
      ]),
    );
  });

  test("widths", async () => {
    const svg = await svgOf("widths");
    const medians = elementsWith(svg, "data-median-nm");
    const wanted = rows("temperature").filter((r) => r["wall_width_median_nm"] !== null);
    expect(medians.map((e) => [Number(e["data-frame"]), Number(e["data-median-nm"])])).toEqual(
      wanted.map((r) => [r["frame"], r["wall_width_median_nm"]]),
    );
    const sound = rows("walls").filter((r) => r["flag"] === "");
    const dots = elementsWith(svg, "class")
      .filter((e) => e["class"] === "profiles")
      .map((e) => e["d"])
      .join("");
    expect(dots.match(/h0/g)?.length).toBe(sound.filter((r) => r["width_nm"] !== null).length);
  });

  test("wall: the profile that was asked for; its curve has the tabled width, its pixels lie on it", async () => {
    const row = rows("walls").filter((r) => r["flag"] === "" && r["width_nm"] !== null)[3];
    const choice = { frame: [String(row["frame"])], wall: String(row["wall"]), profile: String(row["profile"]) };
    const svg = await svgOf("wall", { ...choice, data: out("wall.csv") });
    expect(svg).toContain(
      `frame ${String(row["frame"])}, wall ${String(row["wall"])}, profile ${String(row["profile"])}`,
    );
    expect(Number(elementsWith(svg, "data-width-nm")[0]["data-width-nm"])).toBe(row["width_nm"]);
    const [, ...bins] = parse(readFileSync(out("wall.csv"), "utf8"));
    const chi2 = bins.reduce((a, b) => a + Number(b[5]) ** 2, 0);
    expect(chi2 / bins.length).toBeGreaterThan(0.3);
    expect(chi2 / bins.length).toBeLessThan(2.5);
  });

  test("fringe: the fitted curve reaches the tabled contrast at the tabled place", async () => {
    await svgOf("fringe", { data: out("fringe.csv") });
    const shown = /frame (\d+), wall (\d+), stretch (\d+)/.exec(readFileSync(out("figure.svg"), "utf8"));
    const [frame, wall, stretch] = (shown ?? []).slice(1).map(Number);
    const row = rows("fringes").find((r) => r["frame"] === frame && r["wall"] === wall && r["stretch"] === stretch);
    expect(row?.["detected"]).toBe(1);
    const [, ...bins] = parse(readFileSync(out("fringe.csv"), "utf8")).map((l) => l.map(Number));
    const nearest = bins.reduce((a, b) =>
      Math.abs(b[0] - Number(row?.["offset_nm"])) < Math.abs(a[0] - Number(row?.["offset_nm"])) ? b : a,
    );
    // the bin may lie half a bin beside the extremum
    expect(nearest[6] / Number(row?.["contrast_rad"])).toBeGreaterThan(0.9);
    expect(nearest[6] / Number(row?.["contrast_rad"])).toBeLessThan(1.03);
    // and the measured phase is there too
    expect(Math.abs(nearest[5] - nearest[6])).toBeLessThan(5 * nearest[2] + 0.02);
  });

  test("drift: the residuals of the pairs are small change beside the drift", async () => {
    await svgOf("drift", { data: out("drift.csv") });
    const [, ...lines] = parse(readFileSync(out("drift.csv"), "utf8"));
    const pairs = lines.filter((l) => l[0] === "pair" && l[8] === "1");
    expect(pairs.length).toBeGreaterThan(7);
    for (const p of pairs) expect(Math.hypot(Number(p[4]), Number(p[5]))).toBeLessThan(5);
  });

  test("frames: every channel has its pictures, walls lie in every mixed frame", async () => {
    for (const channel of ["amplitude", "phase", "topography", "states"] as const) {
      const svg = await svgOf("frames", { channel });
      expect(elementsWith(svg, "preserveAspectRatio").length).toBe(8);
    }
    const svg = await svgOf("frames", { frame: ["1", "6"] });
    expect(elementsWith(svg, "preserveAspectRatio").length).toBe(2);
    const mixed = rows("temperature").filter(
      (r) => (r["frame"] === 1 || r["frame"] === 6) && Number(r["wall_length_nm"]) > 0,
    );
    expect(elementsWith(svg, "class").filter((e) => e["class"] === "walls").length).toBe(mixed.length);
  });
});

describe("what cannot be drawn is said", () => {
  const refused = async (kind: string, o: Partial<FigureCommandOptions>): Promise<Error> => {
    const e: unknown = await figure(kind, { db, cooldown: ["kv14-run1"], out: out("none.svg"), ...o }).then(
      () => null,
      (reason: unknown) => reason,
    );
    if (!(e instanceof Error)) throw new Error("it was drawn");
    expect(existsSync(out("none.svg"))).toBe(false);
    return e;
  };

  test.each([
    ["lop", {}, /no figure "lop"; did you mean "loop"\?/],
    ["loop", { out: "loop.pdf" }, /must end in \.svg or \.png/],
    ["loop", { widthMm: "5" }, /--width-mm 5: expected a number from 30/],
    ["loop", { dpi: "many" }, /--dpi many/],
    ["loop", { frame: ["3"] }, /the figure loop has no --frame/],
    ["fringe", { profile: "3" }, /the figure fringe has no --profile/],
    ["frames", { frame: ["99"] }, /--frame 99: there is no such frame/],
    ["frames", { frame: ["1.5"] }, /--frame 1\.5: expected a whole number/],
  ])("%s %j", async (kind, o, message) => {
    const e = await refused(kind, o);
    expect(e).toBeInstanceOf(UsageError);
    expect(e.message).toMatch(message);
  });

  test("several cooldowns where one is shown; a wall that is not there; a place that cannot be written", async () => {
    const both = await refused("drift", { cooldown: undefined });
    expect(both.message).toMatch(/shows one cooldown, and the choice holds 2/);
    expect(both).toMatchObject({ fix: expect.stringContaining("kept-no-pictures, kv14-run1") });
    expect((await refused("wall", { wall: "999" })).message).toMatch(/no profile for this choice/);
    const nowhere = await refused("loop", { out: path.join(dir, "no", "such.svg") });
    expect(nowhere).toBeInstanceOf(InputError);
    expect(nowhere.message).toMatch(/such\.svg: cannot be written/);
  });

  test.each(["frames", "wall", "fringe", "orbit", "drift"])(
    "%s of an analysis from before pictures were kept",
    async (kind) => {
      const e = await refused(kind, { cooldown: ["kept-no-pictures"] });
      expect(e).toBeInstanceOf(InputError);
      expect(e).toMatchObject({
        problems: [{ fix: expect.stringContaining("ingest its cooldown again to draw this") }],
      });
    },
  );

  test.each(["loop", "widths", "domains"])("… but its %s needs none", async (kind) => {
    const svg = await svgOf(kind, { cooldown: ["kept-no-pictures"] });
    expect(svg).toContain("</svg>");
  });
});

test("through the front door: one file, a caption on standard error, nothing on standard output", () => {
  const file = out("door.svg");
  const r = coldseam("figure", "loop", "--db", db, "--out", file, "--data", out("door.csv"));
  expect([r.code, r.out]).toEqual([0, ""]);
  expect(r.err).toContain("bars: 95 % intervals");
  expect(readFileSync(file, "utf8")).toContain("<svg");
  expect(coldseam("figure", "loop", "--db", db).code).toBe(2);
});

test("a system without a font is told so instead of getting a picture without words", async () => {
  expect(await hasFont()).toBe(true);
  const conf = out("fonts.conf");
  writeFileSync(
    conf,
    `<?xml version="1.0"?><!DOCTYPE fontconfig SYSTEM "fonts.dtd"><fontconfig><dir>${out("none")}</dir></fontconfig>`,
  );
  const before = process.env["FONTCONFIG_FILE"];
  process.env["FONTCONFIG_FILE"] = conf;
  const r = coldseam("figure", "loop", "--db", db, "--out", out("door.png"));
  if (before === undefined) delete process.env["FONTCONFIG_FILE"];
  else process.env["FONTCONFIG_FILE"] = before;
  expect(r.code).toBe(1);
  expect(r.err).toMatch(/no font is installed.*\n.*apt-get install fonts-dejavu-core/);
  expect(existsSync(out("door.png"))).toBe(false);
});
