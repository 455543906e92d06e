import { existsSync, mkdtempSync, readFileSync, readdirSync, rmSync, symlinkSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterEach, beforeEach, expect, test } from "vitest";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { madeDatabase } from "./made.js";
import { coldseam } from "./program.js";

let dir: string;
const at = (name: string): string => path.join(dir, name);
beforeEach(() => (dir = mkdtempSync(path.join(tmpdir(), "coldseam-merge-cli-"))));
afterEach(() => rmSync(dir, { recursive: true, force: true }));

test("several databases in a new one: what came from where is said, the sources keep every byte, again changes nothing", () => {
  const a = madeDatabase(at("a.sqlite"), sampleAnalysis({ name: "kv30-a" }));
  const b = madeDatabase(
    at("b.sqlite"),
    sampleAnalysis({ name: "kv30-a" }),
    sampleAnalysis({ name: "kv30-b", images: "c" }),
  );
  const before = [readFileSync(a), readFileSync(b)];
  const r = coldseam("merge", a, b, "--into", at("lab.sqlite"));
  expect(r.code, r.err).toBe(0);
  expect(r.out.replaceAll(`${dir}/`, "")).toBe(
    "lab.sqlite: 2 analyses added, 1 there already\n" +
      "  kv30-a: analysis 1 of a.sqlite is now analysis 1, 2 frames\n" +
      "  kv30-a: analysis 1 of b.sqlite is there already, as analysis 1\n" +
      "  kv30-b: analysis 2 of b.sqlite is now analysis 2, 2 frames\n",
  );
  expect([readFileSync(a), readFileSync(b)].map((x, k) => x.equals(before[k]))).toEqual([true, true]);
  expect(readdirSync(dir).sort()).toEqual(["a.sqlite", "b.sqlite", "lab.sqlite"]);
  const exported = coldseam("export", "walls", "--db", at("lab.sqlite")).out;
  expect(coldseam("merge", b, a, "--into", at("lab.sqlite")).out).toContain("0 analyses added, 3 there already");
  expect(coldseam("export", "walls", "--db", at("lab.sqlite")).out).toBe(exported);
});

test("one name, two contents: both are shown, exit code 1, and no file is made", () => {
  const a = madeDatabase(at("a.sqlite"), sampleAnalysis());
  const b = madeDatabase(at("b.sqlite"), sampleAnalysis({ images: "e" }));
  const r = coldseam("merge", a, b, "--into", at("lab.sqlite"));
  expect(r).toMatchObject({ code: 1, out: "" });
  expect(r.err).toMatch(/b\.sqlite: cooldown "hand-made" stands for other content in .*a\.sqlite\. There: .*Here: /);
  expect(existsSync(at("lab.sqlite"))).toBe(false);
});

test("a file into itself, by whatever name, and a missing --into are wrong command lines", () => {
  const a = madeDatabase(at("a.sqlite"), sampleAnalysis());
  symlinkSync(a, at("link.sqlite"));
  expect(coldseam("merge", a, "--into", at("link.sqlite"))).toMatchObject({ code: 2, out: "" });
  expect(coldseam("merge", a).code).toBe(2);
  expect(coldseam("merge", "--into", at("lab.sqlite")).code).toBe(2);
  expect(existsSync(at("lab.sqlite"))).toBe(false);
});
