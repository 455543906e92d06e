import { spawnSync } from "node:child_process";
import { existsSync, mkdirSync, mkdtempSync, openSync, closeSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import * as fc from "fast-check";
import { afterAll, expect, test } from "vitest";
import { shellWord } from "../../src/cli/called.js";
import { intervalText, loopText, noHalf } from "../../src/cli/summary.js";
import { createTiff } from "../../src/demo/write_tiff.js";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { madeDatabase } from "./made.js";
import { TOP } from "./program.js";

const dir = mkdtempSync(path.join(tmpdir(), "coldseam called '"));
afterAll(() => rmSync(dir, { recursive: true, force: true }));
const ENTRY = path.join(TOP, "scripts/coldseam.mjs");

test("a word of a command means to a shell what it is", () => {
  expect(["lab.sqlite", "odd two's <b>/c.yaml", "=KV $x"].map(shellWord)).toEqual([
    "lab.sqlite",
    "'odd two'\\''s <b>/c.yaml'",
    "'=KV $x'",
  ]);
  const word = fc.string({ minLength: 1, unit: "binary-ascii" }).filter((s) => !/\p{Cc}/u.test(s));
  fc.assert(
    fc.property(fc.array(word, { minLength: 30, maxLength: 30 }), (words) => {
      const r = spawnSync("sh", ["-c", `printf '%s\\n' ${words.map(shellWord).join(" ")}`], { encoding: "utf8" });
      expect(r.stdout.split("\n").slice(0, -1)).toEqual(words);
    }),
    { seed: 3, numRuns: 10 },
  );
});

test("the command that draft prints runs as it stands, in a folder with blanks and a quote; through npm it is npm's", () => {
  const folder = path.join(dir, "it's <b>");
  mkdirSync(folder);
  const writer = createTiff(path.join(folder, "cooling_165K_amp.tif"));
  writer.addPage(
    Float32Array.from({ length: 30 }, (_, k) => k),
    6,
    5,
  );
  writer.close();
  const env = { ...process.env };
  delete env["npm_lifecycle_event"];
  const made = spawnSync(process.execPath, [ENTRY, "draft", folder], { cwd: dir, encoding: "utf8", env });
  const next = /then (.*)\n$/.exec(made.stdout)?.[1] ?? "";
  const run = spawnSync("sh", ["-c", next], { cwd: dir, encoding: "utf8" });
  expect(run.stderr).toMatch(/cooldown\.yaml:3:\d+: sample is left to fill in/);
  const again = spawnSync(process.execPath, [ENTRY, "draft", folder], {
    cwd: dir,
    encoding: "utf8",
    env: { ...env, npm_lifecycle_event: "coldseam" },
  });
  expect(again.stderr).toContain(
    `go on with it: npm run -s coldseam -- check ${shellWord(path.join(folder, "cooldown.yaml"))}\n`,
  );
});

test.skipIf(!existsSync("/dev/full"))("a full disk behind standard output is an error in two lines", () => {
  const db = madeDatabase(path.join(dir, "a.sqlite"), sampleAnalysis());
  for (const args of [["export", "loops"], ["loops"]]) {
    const full = openSync("/dev/full", "w");
    const r = spawnSync(process.execPath, [ENTRY, ...args, "--db", db], {
      encoding: "utf8",
      stdio: ["ignore", full, "pipe"],
    });
    closeSync(full);
    expect([r.status, r.stderr]).toEqual([
      1,
      "coldseam: the output: cannot be written: no space left on its disk\n  fix: free some space, or send it to another disk\n",
    ]);
  }
});

test("why there is no half temperature; a frame that is left out is counted as that", () => {
  const none = noHalf([
    { branch: "cooling", fraction: 0.2 },
    { branch: "cooling", fraction: null },
  ]);
  expect(none).toMatchObject({ cooling: "one half not crossed", warming: "no warming series" });
  expect(noHalf([{ branch: "warming", fraction: null }]).warming).toBe("no metallic fraction");
  expect(intervalText(null, null, null, none.warming)).toBe("none (no warming series)");

  const a = sampleAnalysis();
  expect(loopText(a)).toMatch(/frames: 1 \w+, 1 undecided; none of the 1 after the first placed/);
  const frames = a.cooldown.frames.map((f) => (f.frame === 1 ? { ...f, excluded: "tip changed" } : f));
  expect(loopText({ ...a, cooldown: { ...a.cooldown, frames } })).toMatch(/frames: 1 \w+, 1 left out; 1 of 1 placed/);
});
