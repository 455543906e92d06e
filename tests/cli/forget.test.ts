import { spawnSync } from "node:child_process";
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterEach, beforeEach, expect, test } from "vitest";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { madeDatabase } from "./made.js";
import { coldseam, TOP } from "./program.js";

let dir: string;
let db: string;
beforeEach(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-forget-"));
  db = madeDatabase(
    path.join(dir, "lab.sqlite"),
    sampleAnalysis({ name: "kv30-a" }),
    sampleAnalysis({ name: "kv30-a", settings: { "walls.reachNm": 400 } }),
    sampleAnalysis({ name: "kv30-b", images: "c" }),
  );
});
afterEach(() => rmSync(dir, { recursive: true, force: true }));

const held = (): string => coldseam("cooldowns", "--db", db).out;

test("without a terminal to ask on it needs --yes, says what it would remove, and removes nothing", () => {
  const before = readFileSync(db);
  const r = coldseam("forget", "kv30-a", "--db", db);
  expect(r).toMatchObject({ code: 2, out: "" });
  expect(r.err).toMatch(/all of cooldown kv30-a \(sample KV-14, region A\):\n {2}analysis 1, 2026-01-01 00:00 UTC/);
  expect(r.err).toMatch(/analysis 2, .*: 2 frames, 2 wall profiles/);
  expect(r.err).toContain("fix: add --yes");
  expect(readFileSync(db).equals(before)).toBe(true);
});

test("--yes removes the cooldown, or with --analysis one of its analyses", () => {
  const one = coldseam("forget", "kv30-a", "--analysis", "2", "--db", db, "--yes");
  expect(one).toMatchObject({ code: 0 });
  expect(one.err).toContain("analysis 1 answers from then on");
  expect(one.out).toMatch(/^removed analysis 2 of kv30-a from .*lab\.sqlite/);
  expect(held()).toMatch(/kv30-a\n.*\n {2}analysis 1,/);
  expect(coldseam("forget", "kv30-a", "--db", db, "--yes").out).toMatch(/^removed cooldown kv30-a/);
  expect(held()).not.toContain("kv30-a");
  expect(held()).toContain("kv30-b");
  expect(coldseam("verify", "--db", db).code).toBe(0);
});

test("what is not there is said with what is", () => {
  expect(coldseam("forget", "kv30-x", "--db", db, "--yes").err).toContain("it holds kv30-a, kv30-b");
  expect(coldseam("forget", "kv30-a", "--analysis", "3", "--db", db, "--yes").err).toContain("its analyses are 1, 2");
  expect(coldseam("forget", "kv30-a", "--analysis", "last", "--db", db, "--yes").code).toBe(2);
});

const haveTerminal = spawnSync("script", ["-qec", "test -t 0", "/dev/null"]).status === 0;

test.runIf(haveTerminal)("on a terminal it asks; anything but yes leaves everything", () => {
  const ask = (answer: string): { status: number | null; stdout: string } => {
    const command = `'${process.execPath}' '${path.join(TOP, "scripts/coldseam.mjs")}' forget kv30-a --db '${db}'`;
    return spawnSync("script", ["-qec", command, "/dev/null"], { input: `${answer}\n`, encoding: "utf8" });
  };
  const no = ask("");
  expect(no.stdout).toMatch(/remove it\? The images stay where they are\. \[y\/N\]/);
  expect(no.stdout).toContain("nothing was removed");
  expect(no.status).toBe(1);
  expect(held()).toContain("kv30-a");
  const yes = ask("yes");
  expect(yes.status, yes.stdout).toBe(0);
  expect(held()).not.toContain("kv30-a");
});
