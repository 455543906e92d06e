import { createHash } from "node:crypto";
import { mkdirSync, mkdtempSync, readFileSync, renameSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { afterEach, beforeEach, expect, test } from "vitest";
import type { Analysis } from "../../src/model/analysis.js";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { madeDatabase } from "./made.js";
import { coldseam } from "./program.js";

let dir: string;
const at = (...names: string[]): string => path.join(dir, ...names);
beforeEach(() => (dir = mkdtempSync(path.join(tmpdir(), "coldseam-verify-"))));
afterEach(() => rmSync(dir, { recursive: true, force: true }));

/** The sample analysis with its one image file really there, in a folder of the cooldown's name. */
function withFiles(name: string): Analysis {
  const a = sampleAnalysis({ name });
  const image = Buffer.from(`the image of ${name}`);
  mkdirSync(at(name), { recursive: true });
  writeFileSync(at(name, "a.tif"), image);
  const file = at(name, "a.tif");
  const { cooldown } = a;
  return {
    ...a,
    cooldown: {
      ...cooldown,
      yamlFile: at(name, "cooldown.yaml"),
      frames: cooldown.frames.map((f) => ({ ...f, sources: { amplitude: { ...f.sources.amplitude, file } } })),
      sources: [{ path: "a.tif", sha256: createHash("sha256").update(image).digest("hex"), bytes: image.length }],
    },
  };
}

test("a sound database: a line a check, exit code 0, and not a byte changed", () => {
  const db = madeDatabase(at("lab.sqlite"), sampleAnalysis());
  const before = readFileSync(db);
  const r = coldseam("verify", "--db", db);
  expect(r).toMatchObject({ code: 0, err: "" });
  const lines = r.out.trimEnd().split("\n");
  expect(lines.at(-1)).toMatch(/lab\.sqlite: sound, 27 checks$/);
  expect(lines.slice(0, -1).every((l) => /^ok {4}.+ \(\d+ [a-z]+\)$/.test(l))).toBe(true);
  expect(readFileSync(db).equals(before)).toBe(true);
});

test("what is wrong is shown with its place, exit code 1; a rule broken often is shown five times", () => {
  const db = madeDatabase(at("lab.sqlite"), sampleAnalysis({ frames: 12 }));
  const hand = new Database(db);
  hand.pragma("ignore_check_constraints = ON");
  hand.exec("UPDATE frame SET metallic_fraction_high = 0.2");
  hand.close();
  const r = coldseam("verify", "--db", db);
  expect(r.code).toBe(1);
  expect(r.out).toMatch(
    /WRONG fractions lie in .* \(12 frames\)\n {8}hand-made, analysis 1, frame 0: mixed, fraction 0.5 in 0.49 to 0.2\n/,
  );
  expect(r.out).toContain("        and 7 more\n");
  expect(r.out).toMatch(/[2-9] of 27 checks found something wrong\n$/);
});

test("--sources: files where they were, moved, changed, gone", () => {
  const db = madeDatabase(at("lab.sqlite"), withFiles("one"), withFiles("two"));
  const verify = (...more: string[]): ReturnType<typeof coldseam> =>
    coldseam("verify", "--db", db, "--sources", ...more);
  const there = verify();
  expect(there.code, there.out).toBe(0);
  expect(there.out).toContain("ok    source files have their SHA-256 (2 files)");

  // Database and data moved together: still found. The data alone: with --folder, the folder that holds theirs.
  mkdirSync(at("archive"));
  for (const f of ["one", "two"]) renameSync(at(f), at("archive", f));
  const gone = verify();
  expect(gone.code).toBe(0);
  expect(gone.out).toContain("ok    source files have their SHA-256 (0 files)");
  expect(gone.out).toMatch(
    /not here: 2 source files; --folder says where they are now\n {8}one, analysis 1: a\.tif \(looked for .*one\/a\.tif\)\n/,
  );
  expect(gone.out).toMatch(/: sound, 28 checks; 2 source files not here\n$/);
  expect(verify("--folder", at("archive")).code).toBe(0);

  writeFileSync(at("archive", "two", "a.tif"), "the image of somebody else");
  const changed = verify("--folder", at("archive"));
  expect(changed.code).toBe(1);
  expect(changed.out).toMatch(/two, analysis 2: a\.tif is another file: 16 bytes then, 26 now/);
  expect(changed.out).not.toMatch(/one, analysis 1/);
});

test("--folder without --sources is a wrong command line; a database that is none is refused", () => {
  const db = madeDatabase(at("lab.sqlite"), sampleAnalysis());
  expect(coldseam("verify", "--db", db, "--folder", dir)).toMatchObject({ code: 2, out: "" });
  expect(coldseam("verify", "--db", at("none.sqlite")).err).toContain("no such database");
});
