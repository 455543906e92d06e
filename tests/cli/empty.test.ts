import { spawnSync } from "node:child_process";
import { existsSync, mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, expect, test } from "vitest";
import { forTerminal } from "../../src/cli/export.js";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { madeDatabase } from "./made.js";
import { coldseam, TOP } from "./program.js";

let dir: string;
let empty: string;
let full: string;
const at = (name: string): string => path.join(dir, name);
const NAME = "run\u001b[31m\u0007red\u009b2J";

beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-empty-"));
  empty = madeDatabase(at("empty.sqlite"));
  full = madeDatabase(at("full.sqlite"), sampleAnalysis({ name: NAME }));
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

test("an empty database: every command says that it holds no cooldown yet, and what to do", () => {
  for (const command of [["cooldowns"], ["loops"], ["walls"], ["export", "temperature"]]) {
    const r = coldseam(...command, "--db", empty);
    expect(r.code, command[0]).toBe(0);
    expect(r.out + r.err, command[0]).toMatch(/no cooldown in this database yet; `coldseam ingest COOLDOWN\.yaml/);
    expect(r.out + r.err, command[0]).not.toContain("choice");
  }
  for (const [command, out] of [
    [["report"], at("r.html")],
    [["figure", "loop"], at("f.svg")],
  ] as const) {
    const r = coldseam(...command, "--db", empty, "--out", out);
    expect(r.code, command[0]).toBe(1);
    expect(r.err).toMatch(/this database holds no cooldown yet\n {2}fix: `coldseam ingest COOLDOWN\.yaml/);
    expect(existsSync(out)).toBe(false);
  }
  expect(coldseam("loops", "--db", empty, "--format", "json").out).toBe("[]\n");
});

test("where there is a cooldown and the choice has none, that is what is said", () => {
  const r = coldseam("report", "--db", full, "--sample", "other", "--out", at("r.html"));
  expect(r).toMatchObject({ code: 1 });
  expect(r.err).toContain("no cooldown for this choice");
});

test("what is in names reaches a pipe and a file as it is, and steers no terminal", () => {
  for (const format of ["csv", "tsv"]) {
    const { out, err } = coldseam("export", "temperature", "--db", full, "--format", format);
    expect(err).toBe("");
    expect(out).toContain(NAME);
    const shown = [...forTerminal([out.slice(0, 301), out.slice(301)])].join("");
    expect(shown).not.toMatch(/[^\P{Cc}\n\t]/u);
    expect(shown).toContain("\\x1b[31m");
    expect(shown.split("\n")).toHaveLength(out.split("\n").length);
  }
});

const MAY_SCRIPT = spawnSync("script", ["-qec", "true", "/dev/null"]).status === 0;

test.runIf(MAY_SCRIPT)("on a terminal of its own no command lets a name steer it", () => {
  const entry = path.join(TOP, "scripts/coldseam.mjs");
  for (const command of ["loops", "walls", "cooldowns", "export temperature"])
    for (const form of command === "export temperature" ? ["csv", "json"] : ["text", "json"]) {
      const line = `'${process.execPath}' '${entry}' ${command} --format ${form} --db '${full}'`;
      const { stdout, status } = spawnSync("script", ["-qec", line, "/dev/null"], { encoding: "utf8" });
      expect(status, line).toBe(0);
      expect(stdout, line).toContain("red");
      expect(stdout, line).not.toMatch(/[^\P{Cc}\r\n\t]/u);
    }
});
