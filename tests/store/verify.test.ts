import { deflateSync } from "node:zlib";
import Database from "better-sqlite3";
import { expect, test } from "vitest";
import { migrate } from "../../src/store/migrate.js";
import type { Db } from "../../src/store/open.js";
import { saveAnalysis } from "../../src/store/save.js";
import { verifyDatabase } from "../../src/store/verify.js";
import { RULES } from "../../src/store/verify_rules.js";
import { smoothLine } from "../../src/stages/walls/smooth_line.js";
import { sampleAnalysis } from "./sample_analysis.js";

const NOW = new Date("2026-01-02T03:04:05Z");

function stored(): Db {
  const db = new Database(":memory:");
  migrate(db, ":memory:");
  saveAnalysis(db, sampleAnalysis(), NOW);
  saveAnalysis(db, sampleAnalysis({ name: "other", images: "c", frames: 4 }), NOW);
  db.exec("INSERT INTO preview VALUES (1, 0, 'amplitude', 1, 3, 1, 2, 0, 1, CAST('RIFF…' AS BLOB))");
  return db;
}

/** Names of the checks that found something, and all that they said. */
function wrongIn(db: Db): { names: string[]; text: string } {
  const wrong = [...verifyDatabase(db)].filter((c) => c.problems.length > 0);
  return { names: wrong.map((c) => c.name), text: wrong.flatMap((c) => c.problems).join("\n") };
}

test("a sound database passes every check, and every check has looked at something", () => {
  const db = stored();
  const checks = [...verifyDatabase(db)];
  expect(checks.filter((c) => c.problems.length > 0)).toEqual([]);
  expect(checks.filter((c) => c.looked === 0)).toEqual([]);
  expect(checks).toHaveLength(RULES.length + 7);
});

const blob = (...bytes: number[]): string => `x'${deflateSync(Uint8Array.from(bytes)).toString("hex")}'`;

// What is changed by hand, the check that must find it, and what it must say.
const FAULTS: [change: string, check: RegExp, words: RegExp][] = [
  [
    "UPDATE frame SET metallic_fraction = 1.25 WHERE frame = 0",
    /^fractions lie/,
    /hand-made, analysis 1, frame 0: mixed, fraction 1.25/,
  ],
  ["UPDATE frame SET metallic_fraction_low = 0.505 WHERE frame = 0", /^fractions lie/, /0.505 to 0.51/],
  [
    "UPDATE frame SET metallic_fraction = 0.5, metallic_fraction_low = 0, metallic_fraction_high = 1 WHERE frame = 1",
    /^fractions lie/,
    /undecided, fraction 0.5/,
  ],
  ["UPDATE frame SET metallic_fraction_high = NULL WHERE frame = 0", /^fractions lie/, /to none/],
  [
    "UPDATE profile SET width_nm = NULL WHERE profile = 0",
    /^a profile is resolved exactly/,
    /profile 0: resolved 1, width none/,
  ],
  ["UPDATE profile SET resolved = 0 WHERE profile = 0", /^a profile is resolved exactly/, /resolved 0, width 84.25/],
  ["UPDATE profile SET width_upper95_nm = NULL WHERE resolved = 0", /^a profile is resolved exactly/, /profile 1/],
  ["UPDATE profile SET arc_nm = 121 WHERE profile = 1", /^profiles stand on/, /at 121.0 nm of 120.0/],
  [
    "UPDATE profile SET flag = 'poor-fit' WHERE profile = 1",
    /^each frame counts its sound/,
    /says 2 profiles, 0.5 unresolved; has 1, 0.0/,
  ],
  ["DELETE FROM profile WHERE profile = 1", /^each frame counts its sound/, /says 2 profiles/],
  ["UPDATE frame SET wall_width_median_low_nm = 85 WHERE frame = 0", /^median widths/, /median 84.25 in 85/],
  [
    "UPDATE frame SET wall_length_nm = 119 WHERE frame = 0",
    /^the length of all walls/,
    /says 119.0 nm, its walls make 120/,
  ],
  ["UPDATE fringe SET adjusted_p = 0.0005", /^fringes: prob/, /p 0.001, adjusted 0.0005/],
  ["UPDATE frame SET fringe_share = 0.5 WHERE frame = 0", /^the share of walls with/, /says 0.5, its stretches make 1/],
  ["UPDATE fringe SET detected = 0", /^the share of walls with/, /says 1.0, its stretches make 0/],
  ["UPDATE frame SET metallic_domains = 0 WHERE frame = 0", /^no frame has more tracked/, /tracks 1.0 metallic/],
  ["UPDATE frame SET drift_x_nm = 3 WHERE frame = 0", /^frames are placed/, /drift 3/],
  ["UPDATE frame SET drift_sd_nm = 3 WHERE frame = 1", /^frames are placed/, /drift none, none, sd 3/],
  [
    "INSERT INTO domain VALUES (1, 7, 'metallic', 'nucleated', 'vanished')",
    /^each domain appears/,
    /domain 7: nucleated at none/,
  ],
  ["DELETE FROM loop WHERE analysis_id = 1", /^there is a loop for every/, /cycle 1: has frames but no loop/],
  ["UPDATE frame SET cycle = 3 WHERE frame = 1", /^there is a loop for every/, /2 cycles up to number 3/],
  [
    "UPDATE frame SET temperature_k = 151 WHERE frame = 1 AND analysis_id = 1",
    /^branch, cycle and temp/,
    /warming, cycle 1, 151.0 K; described as/,
  ],
  [
    "UPDATE frame SET temperature_sd_k = 0.25 WHERE temperature_sd_k IS NOT NULL",
    /^spread, ramp and lag/,
    /spread 0.25 K, ramp 0.000167 K\/s, lag -0.005 K; described as/,
  ],
  [
    "UPDATE frame SET lag_shift_k = NULL WHERE lag_shift_k IS NOT NULL",
    /^spread, ramp and lag/,
    /lag none K; described as/,
  ],
  ["UPDATE frame SET frame = 9 WHERE frame = 3", /^frames are numbered/, /4 frames up to number 9/],
  ["UPDATE cooldown SET sample = 'KV-99' WHERE id = 2", /^sample, name and region/, /of sample KV-14/],
  ["UPDATE loop SET width_k = 7", /^a loop's width/, /warming none, width 7/],
  ["UPDATE loop SET warming_half_k = 170, width_k = 9", /^a loop's width/, /width 9/],
  ["UPDATE loop SET cooling_half_low_k = 161", /^a loop's width/, /cooling 160/],
  [
    "UPDATE loop SET cooling_half_k = 171, cooling_half_high_k = 172",
    /^half temperatures lie/,
    /171.0 K, cooling from 160.0 to 160.0/,
  ],
  ["UPDATE loop SET complete = 1", /^a loop's extremes/, /complete 1/],
  ["UPDATE loop SET highest_fraction = 0.75", /^a loop's extremes/, /0.5 to 0.75/],
  [`UPDATE frame SET map_deflated = ${blob(0, 0, 1)} WHERE frame = 0`, /^maps unpack/, /3 pixels, not 2 × 3/],
  [`UPDATE frame SET map_deflated = ${blob(0, 0, 1, 0, 1, 7)} WHERE frame = 0`, /^maps unpack/, /a pixel of 7/],
  ["UPDATE frame SET map_deflated = x'00ff00ff' WHERE frame = 0", /^maps unpack/, /does not unpack/],
  [
    `UPDATE frame SET map_deflated = ${blob(0, 0, 1, 0, 0, 255)} WHERE frame = 0`,
    /^maps unpack/,
    /no metallic region of its map has the 240 nm2/,
  ],
  [
    `UPDATE frame SET map_deflated = ${blob(1, 0, 0, 0, 0, 1)} WHERE frame = 0`,
    /^maps unpack/,
    /no least area tells them apart|no metallic region/,
  ],
  [
    "UPDATE domain_appearance SET area_nm2 = 480 WHERE domain = 1",
    /^maps unpack/,
    /no insulating region of its map has the 480 nm2/,
  ],
  [
    "UPDATE frame SET insulating_domains = 2 WHERE frame = 0",
    /^maps unpack/,
    /says 2 insulating domains, its map has 1/,
  ],
  ["UPDATE wall SET points = x'0000'", /^lines of the walls/, /2 bytes are no line/],
  ["UPDATE wall SET length_nm = 150", /^lines of the walls/, /says 150.00 nm, its points make 120.00/],
  [
    `UPDATE wall SET points = x'${Buffer.from(Float32Array.of(0, 0, Number.NaN, 1).buffer).toString("hex")}'`,
    /^lines of the walls/,
    /point 1 is NaN/,
  ],
  [
    "UPDATE analysis SET description_json = json_set(description_json, '$.pixel.xNm', 11) WHERE id = 1",
    /^what is described/,
    /analysis 1: the content's SHA-256/,
  ],
  [
    "UPDATE analysis SET settings_json = json_set(settings_json, '$.\"walls.reachNm\"', 301) WHERE id = 1",
    /^what is described/,
    /the work's SHA-256/,
  ],
  [
    "DELETE FROM source WHERE analysis_id = 2",
    /^what is described/,
    /other, analysis 2: an image file of SHA-256 c+… is not among/,
  ],
  ["UPDATE preview SET step_y = 1", /^previews are/, /frame 0: amplitude: 1 × 3 boxes of 1 × 1 for 2 × 3 pixels/],
  ["UPDATE preview SET image_cols = 4", /^previews are/, /1 × 4 boxes of 2 × 1 for 2 × 3/],
  ["UPDATE preview SET image = x'00'", /^previews are/, /frame 0: amplitude/],
  ["DELETE FROM frame WHERE frame = 0 AND analysis_id = 1", /^foreign keys/, /rows of wall have no row in frame/],
  ["DROP INDEX notice_by_analysis", /^tables and views/, /notice_by_analysis is missing/],
  ["CREATE TABLE extra (x)", /^tables and views/, /extra is not part/],
  [
    "DROP VIEW loops; CREATE VIEW loops AS SELECT cooldown, cycle FROM loops_all",
    /^each view has/,
    /loops has cooldown, cycle; expected cooldown, cycle, cooling_half_K/,
  ],
  ["PRAGMA application_id = 1", /^tables and views/, /not marked as coldseam's/],
];

test.each(FAULTS)("finds: %s", (change, check, words) => {
  const db = stored();
  db.pragma("ignore_check_constraints = ON");
  db.pragma("foreign_keys = OFF");
  db.exec(change);
  const wrong = wrongIn(db);
  expect(wrong.names.filter((n) => check.test(n))).toHaveLength(1);
  expect(wrong.text).toMatch(words);
});

/** A closed wall as small as they come (ten points round 30 nm) and a long winding one, far from the frame's corner. */
function withLines(): Db {
  const db = stored();
  const ring = Float64Array.from({ length: 20 }, (_, k) => {
    const turn = (Math.PI / 5) * (k >> 1);
    return 9000 + 15 * (k % 2 === 0 ? Math.cos(turn) : Math.sin(turn));
  });
  const winding = Float64Array.from({ length: 400 }, (_, k) =>
    k % 2 === 0 ? 5 * k : 7000 + 40 * Math.sin((5 * k) / 60),
  );
  db.exec("DELETE FROM profile; DELETE FROM fringe");
  const put = db.prepare(
    "INSERT INTO wall (analysis_id, frame, wall, closed, length_nm, points) VALUES (1, 0, ?, ?, ?, ?)",
  );
  [ring, winding].forEach((points, k) => {
    const line = smoothLine(points, k === 0, 9.4, 2);
    if (line === null) throw new Error("no line");
    put.run(k + 1, k === 0 ? 1 : 0, line.lengthNm, new Uint8Array(Float32Array.from(line.points).buffer));
  });
  return db;
}

test("bent and small walls have their length; one wrong by a hundredth has not", () => {
  const lines = (db: Db): readonly string[] =>
    [...verifyDatabase(db)].find((c) => c.name.startsWith("lines of the walls"))?.problems ?? ["no such check"];
  expect(lines(withLines())).toEqual([]);
  for (const wall of [1, 2])
    for (const factor of [0.99, 1.01]) {
      const db = withLines();
      db.exec(`UPDATE wall SET length_nm = ${factor} * length_nm WHERE wall = ${wall}`);
      expect(lines(db)).toHaveLength(1);
      expect(lines(db)[0]).toMatch(new RegExp(`frame 0, wall ${wall}: says`));
    }
});

test("every rule has a fault here that it finds", () => {
  for (const rule of RULES)
    expect(
      FAULTS.some(([, check]) => check.test(rule.name)),
      rule.name,
    ).toBe(true);
});

test("a file that breaks in the middle of a check is reported, and the other checks go on", () => {
  const bytes = stored().serialize();
  const page = Number(bytes.readUInt16BE(16));
  // The root page of `profile`, blotted out.
  const root = new Database(bytes).prepare("SELECT rootpage FROM sqlite_master WHERE name = 'profile'").pluck().get();
  bytes.fill(0xff, (Number(root) - 1) * page, Number(root) * page);
  const checks = [...verifyDatabase(new Database(bytes))];
  expect(checks).toHaveLength(RULES.length + 7);
  const text = checks.flatMap((c) => c.problems).join("\n");
  expect(text).toMatch(/could not be looked at: .*malformed/);
  expect(checks.find((c) => c.name.startsWith("fractions lie"))?.problems).toEqual([]);
});
