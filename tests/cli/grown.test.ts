import { mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, expect, test } from "vitest";
import { parse, stringify } from "yaml";
import { generateStack } from "../../src/demo/index.js";
import { tinyCooldown } from "../../src/study/survival.js";
import { coldseam } from "./program.js";

let dir: string;
let whole: string;
let first: string;
let second: string;
const at = (name: string): string => path.join(dir, name);

beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-grown-"));
  whole = generateStack(tinyCooldown("kv31", 7), at("run"));
  // The same cooldown as two files: its cooling series, then its warming series.
  const described = parse(readFileSync(whole, "utf8")) as { series: unknown[] };
  [first, second] = ["first", "second"].map((name, k) => {
    const file = at(`run/${name}.yaml`);
    writeFileSync(file, stringify({ ...described, series: [described.series[k]] }));
    return file;
  });
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

const tables = (db: string, analysis: number): string[] =>
  ["temperature", "walls", "loops"].map((t) => {
    const r = coldseam("export", t, "--db", db, "--format", "json", "--analysis", String(analysis));
    expect(r.err).toBe("");
    return r.out.replaceAll(`"analysis":${analysis}`, "");
  });

test("a run that went on: the longer description is analysed anew as a whole, and is what one file of both gives", () => {
  const db = at("lab.sqlite");
  const args = ["--db", db, "--workers", "1"];
  expect(coldseam("ingest", first, ...args)).toMatchObject({ code: 0 });
  const grown = coldseam("ingest", first, second, ...args);
  expect(grown.err).toMatch(/^kv31: 2 frames known, 2 new; the whole is analysed$/m);
  expect(grown.out).toMatch(/kv31: 4 frames stored in .* as analysis 2/);
  expect(JSON.parse(coldseam("cooldowns", "--db", db, "--format", "json").out)).toMatchObject([
    { analysis: 2, analyses: 2, frames: 4, cycles: 1 },
  ]);
  expect(coldseam("ingest", first, second, ...args).out).toMatch(/already in .* as analysis 2/);

  const other = at("other.sqlite");
  expect(coldseam("ingest", whole, "--db", other, "--workers", "0")).toMatchObject({ code: 0 });
  expect(tables(db, 2)).toEqual(tables(other, 1));
  expect(coldseam("verify", "--db", db, "--sources")).toMatchObject({ code: 0 });

  // Not the other way round: what is stored is more than what is given.
  const back = coldseam("ingest", second, ...args);
  expect(back.code).toBe(1);
  expect(back.err).toMatch(/already holds a cooldown "kv31" with other content: a cooling frame at .* K there/);
});

test("check reads several files as one, and tells what contradicts", () => {
  const r = coldseam("check", first, second);
  expect(r).toMatchObject({ code: 0 });
  expect(r.out).toMatch(/4 frames of/);
  expect(r.out).toMatch(/next: coldseam ingest .*first\.yaml .*second\.yaml --db/);
  const other = at("run/other.yaml");
  writeFileSync(other, readFileSync(second, "utf8").replace(/^sample: .*$/m, "sample: another"));
  const wrong = coldseam("check", first, other);
  expect(wrong.code).toBe(1);
  expect(wrong.err).toMatch(/other\.yaml:\d+:\d+: sample is "another" here, ".*" at .*first\.yaml:\d+:\d+\n {2}fix: /);
});
