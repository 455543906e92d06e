import { spawnSync } from "node:child_process";
import { writeFileSync, readFileSync } from "node:fs";
import path from "node:path";
import { afterEach, beforeEach, expect, test } from "vitest";
import { saveAnalysis } from "../../src/store/save.js";
import { openForWriting } from "../../src/store/open.js";
import { CooldownFolder } from "../input/folder.js";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { coldseam, TOP } from "./program.js";

let folder: CooldownFolder;
beforeEach(() => {
  folder = new CooldownFolder();
});
afterEach(() => folder.remove());

test.each([
  [["loops"], "--db is missing", "add `--db FILE`"],
  [
    ["loops", "--dbb", "lab.sqlite"],
    "no option --dbb; did you mean --db?",
    "`coldseam loops --help` lists the options",
  ],
  [["loops", "--db"], "--db has no value behind it", "write `--db FILE`"],
  [["lops", "--db", "x"], 'no command "lops"; did you mean loops?', "`coldseam --help` lists the commands"],
  [["check"], "check: no <yaml> given", "`coldseam check --help` shows how it is called"],
  [["export", "walls", "--db", "x", "--format", "xls"], "--format xls: no such choice", "it is one of csv, tsv, json"],
  [
    ["loops", "all", "--db", "x"],
    "loops takes 0 words besides its options, not 1",
    "put a name with blanks in quotes; `coldseam loops --help` shows how it is called",
  ],
  [["--nope"], "no option --nope", "`coldseam --help` lists the options"],
])("a slip on the command line: %s", (args, problem, fix) => {
  expect(coldseam(...args)).toEqual({ code: 2, out: "", err: `coldseam: ${problem}\n  fix: ${fix}\n` });
});

test("help and version are no slips", () => {
  expect(coldseam("--version")).toMatchObject({ code: 0, err: "" });
  expect(coldseam("loops", "--help").out).toMatch(/^Usage: coldseam loops/);
});

test("an image in the place of the description: one line", () => {
  folder.stack("scan.tif", 1);
  const r = coldseam("check", path.join(folder.path, "scan.tif"));
  expect(r.code).toBe(1);
  expect(r.err).toMatch(
    /^coldseam: .*scan\.tif: not text: byte 3 is 0x00; expected a cooldown\.yaml in UTF-8\n {2}fix: .*\n$/,
  );
  // Text that is no YAML: the first mistakes, and how many more.
  const lines = Array.from({ length: 60 }, (_, k) => `a${k}: b: c`).join("\n");
  const many = coldseam("check", folder.text("notes.yaml", lines));
  expect(many.err.match(/fix: /g)?.length).toBeLessThanOrEqual(21);
});

test("images too small to tell anything from are refused, by check and by ingest", () => {
  folder.stack("a.tif", 2, 5, 40);
  const yaml = folder.text(
    "cooldown.yaml",
    "sample: S\ncooldown: C\nscan: { pixel_size_nm: [10, 10] }\nseries:\n- { branch: cooling, stacks: { amplitude: a.tif }, temperatures_K: [180, 170] }\n",
  );
  const words = /a\.tif#0: images of 40 × 5 pixels; at least 16 a side are needed\n {2}fix: give the whole scan/;
  expect(coldseam("check", yaml)).toMatchObject({ code: 1, err: expect.stringMatching(words) });
  const db = path.join(folder.path, "lab.sqlite");
  expect(coldseam("ingest", yaml, "--db", db)).toMatchObject({ code: 1, err: expect.stringMatching(words) });
});

test("a cooling series that was warmed is a warning, not a note among others", () => {
  folder.stack("a.tif", 3, 20, 20);
  const yaml = folder.text(
    "cooldown.yaml",
    "sample: S\ncooldown: C\nscan: { pixel_size_nm: [10, 10] }\nseries:\n- { branch: cooling, stacks: { amplitude: a.tif }, temperatures_K: [150, 160, 170] }\n",
  );
  expect(coldseam("check", yaml).err).toMatch(
    /^warning: frame 0: the temperatures of this cooling series rise, from 150 to 170 K: write `branch: warming`/m,
  );
});

const NAME = "evil\x1b]0;owned\x07\x1b[2J";
const MAY_SCRIPT = process.platform === "linux" && spawnSync("script", ["--version"]).status === 0;

test("what is in names does not steer a terminal; a pipe gets every byte", () => {
  const db = path.join(folder.path, "lab.sqlite");
  const handle = openForWriting(db);
  saveAnalysis(handle, sampleAnalysis({ name: NAME }), new Date("2026-01-01T00:00:00Z"));
  handle.close();
  expect(coldseam("export", "loops", "--db", db).out).toContain(NAME);
  if (!MAY_SCRIPT) return;
  const typed = path.join(folder.path, "typed");
  const command = `'${process.execPath}' '${path.join(TOP, "scripts/coldseam.mjs")}' export loops --db '${db}'`;
  writeFileSync(typed, "");
  const r = spawnSync("script", ["-qec", command, typed], { encoding: "utf8", stdio: ["ignore", "pipe", "pipe"] });
  expect(r.status, r.stderr).toBe(0);
  const seen = readFileSync(typed, "utf8");
  expect(seen).toContain("evil\\x1b]0;owned\\x07\\x1b[2J,1,");
  expect(seen).not.toContain("\x1b");
});
