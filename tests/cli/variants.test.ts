import { mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, expect, test } from "vitest";
import { analyse } from "../../src/analyse.js";
import { defaultSpec, generateStack, readTruth, type SpecOverrides } from "../../src/demo/index.js";
import { readCooldown } from "../../src/input/index.js";
import { settingsWith } from "../../src/settings.js";
import { openForWriting } from "../../src/store/open.js";
import { readTable, type Row } from "../../src/store/read.js";
import { saveAnalysis } from "../../src/store/save.js";
import { errorsOf, largest, rms, scoreCooldown } from "../../src/study/score.js";
import { tableNamed, type ExportedTable } from "../../src/tables/columns.js";

/** Cooldowns as laboratories have them: a channel missing, one branch only, several cycles, oblong pixels. All go through the files. */

let dir: string;
beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-variants-"));
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

const DOWN = { branch: "cooling", temperaturesK: [180, 156, 150, 125] } as const;
const UP = { branch: "warming", temperaturesK: [127, 158, 164, 185] } as const;
const SMALL: SpecOverrides = {
  rows: 96,
  cols: 96,
  domains: { scaleNm: 140 },
  wall: { widthNm: 70 },
  series: [DOWN, UP],
  drift: { stepSdNm: 25, jumpNm: 120, limitNm: 120 },
  unmeasured: { chance: 0 },
};

interface Outcome {
  readonly score: ReturnType<typeof scoreCooldown>;
  readonly rows: (table: string) => Row[];
  readonly notices: readonly string[];
}

async function run(name: string, spec: SpecOverrides, edit: (yaml: string) => string = (y) => y): Promise<Outcome> {
  const yaml = generateStack(defaultSpec({ ...SMALL, seed: 7, ...spec, cooldown: name }), path.join(dir, name));
  writeFileSync(yaml, edit(readFileSync(yaml, "utf8")));
  const cooldown = await readCooldown(yaml);
  const analysis = await analyse(cooldown, { settings: settingsWith(), programVersion: "test", workers: 0 });
  const db = openForWriting(path.join(dir, `${name}.sqlite`));
  saveAnalysis(db, analysis, new Date(0));
  analysis.release?.();
  const score = scoreCooldown(db, readTruth(path.dirname(yaml)));
  const tables = new Map(
    ["temperature", "walls", "fringes", "loops", "domains"].map((t) => [
      t,
      [...readTable(db, tableNamed(t) as ExportedTable)],
    ]),
  );
  db.close();
  return { score, rows: (t) => tables.get(t) ?? [], notices: analysis.notices.map((n) => `${n.code}: ${n.message}`) };
}

const without = (channel: string) => (yaml: string) =>
  yaml.replaceAll(new RegExp(`^ +${channel}: \\w+\\.tif\\n`, "gm"), "");

test("unequal pixels and an oblong frame", async () => {
  const { score } = await run("oblong", { rows: 80, cols: 120, pixel: { xNm: 10, yNm: 14 } });
  expect(score.framesNotPlaced).toBe(0);
  expect(largest(score.driftPx)).toBeLessThan(0.15);
  expect(largest(score.fraction)).toBeLessThan(0.01);
  expect(Math.abs(rms(errorsOf(score.medianWidth)))).toBeLessThan(0.06);
  expect(score.singleStateProfiles).toBe(0);
});

test("without topography frames are placed on the amplitude, and that is said", async () => {
  const { score, notices } = await run(
    "no-topography",
    { rows: 128, cols: 128, drift: { stepSdNm: 15, jumpChance: 0, limitNm: 60 }, debris: { perUm2: 5 } },
    without("topography"),
  );
  expect(notices.join(" ")).toMatch(/amplitude|topography/);
  expect(largest(score.fraction)).toBeLessThan(0.015);
  expect(score.singleStateProfiles).toBe(0);
  // placed ones are right; one that could not be placed is empty, not wrong
  expect(largest(score.driftPx)).toBeLessThan(1);
});

test("without phase there are no fringes, and widths come from the amplitude", async () => {
  const { score, rows } = await run("no-phase", {}, without("phase"));
  expect(rows("fringes")).toEqual([]);
  expect(rows("temperature").every((r) => r["fringe_share"] === null)).toBe(true);
  expect(largest(score.fraction)).toBeLessThan(0.02);
  expect(Math.abs(rms(errorsOf(score.medianWidth)))).toBeLessThan(0.12);
});

test("without a tip there are only apparent widths and their limits", async () => {
  const { rows } = await run("no-tip", {}, (y) => y.replace(/^tip:\n(  .*\n)+/m, ""));
  const walls = rows("walls").filter((r) => r["flag"] === "");
  expect(walls.length).toBeGreaterThan(5);
  for (const w of walls) {
    expect(w).toMatchObject({ width_nm: null, resolved: 0, tip_resolution_nm: null });
    expect(w["apparent_width_nm"] as number).toBeGreaterThan(30);
    expect(w["width_upper95_nm"] as number).toBeGreaterThan(w["apparent_width_nm"] as number);
  }
});

test("one branch only: a loop with one half temperature and no width", async () => {
  const { rows } = await run("warming-only", { series: [UP] });
  expect(rows("loops")).toHaveLength(1);
  expect(rows("loops")[0]).toMatchObject({ cycle: 1, cooling_half_K: null, width_K: null, area_K: null, complete: 0 });
  expect(rows("loops")[0]?.["warming_half_K"]).toBeTypeOf("number");
});

test("several cycles: a loop each, one track of positions", async () => {
  const { score, rows } = await run("two-cycles", { series: [DOWN, UP, DOWN, UP] });
  expect(rows("loops").map((r) => r["cycle"])).toEqual([1, 2]);
  expect(rows("temperature").map((r) => r["cycle"])).toEqual([1, 1, 1, 1, 1, 1, 1, 1, 2, 2, 2, 2, 2, 2, 2, 2]);
  expect(score.framesNotPlaced).toBe(0);
  expect(largest(score.driftPx)).toBeLessThan(0.15);
});

test("a cooldown that never leaves one state does not say which", async () => {
  const { rows } = await run("one-state", { series: [{ branch: "cooling", temperaturesK: [200, 195, 190, 185] }] });
  for (const r of rows("temperature"))
    expect(r).toMatchObject({ metallic_fraction: null, flag: "undecided", amplitude_metallic: null });
  expect(rows("walls")).toEqual([]);
  expect(rows("domains")).toEqual([]);
});

test("a frame that is left out is said once, and flagged as that", async () => {
  const { rows, notices } = await run("left-out", {}, (y) => `${y}exclude:\n- { frame: 2, reason: tip changed }\n`);
  expect(rows("temperature").map((r) => r["flag"])).toEqual(["", "", "left-out", "", "", "", "", ""]);
  expect(notices.filter((n) => /left out|no pixel was measured|could not be placed|one level/.test(n))).toEqual([
    expect.stringMatching(/left out: tip changed$/),
  ]);
});

test("both branches in one series are warned of; kept apart they are not", async () => {
  const T = [144, 148, 152, 156, 160, 164];
  const spec = defaultSpec({
    ...SMALL,
    seed: 7,
    cooldown: "joined",
    series: [
      { branch: "cooling", temperaturesK: [...T].reverse() },
      { branch: "warming", temperaturesK: T.map((t) => t + 1) },
    ],
  });
  const cooldown = await readCooldown(generateStack(spec, path.join(dir, "joined")));
  const frames = cooldown.frames.map((f) => ({ ...f, series: 0, branch: "cooling" as const }));
  const warned: string[] = [];
  for (const c of [cooldown, { ...cooldown, frames }]) {
    const a = await analyse(c, { settings: settingsWith(), programVersion: "test", workers: 0 });
    warned.push(a.notices.flatMap((n) => (n.code === "fraction-not-rising" ? [n.message] : [])).join());
  }
  expect(warned).toEqual(["", expect.stringMatching(/along cooling: .* K, .* are both branches in one series\?$/)]);
});
