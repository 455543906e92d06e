import { existsSync, mkdtempSync, readdirSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, expect, test, vi } from "vitest";
import { defaultSpec, generateStack } from "../../src/demo/index.js";
import { coldseam } from "./program.js";

let dir: string;
let yaml: string;
let db: string;
beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-cache-cli-"));
  db = path.join(dir, "lab.sqlite");
  const spec = defaultSpec({
    cooldown: "kept",
    rows: 64,
    cols: 64,
    seed: 3,
    series: [{ branch: "cooling", temperaturesK: [180, 155, 125] }],
  });
  yaml = generateStack(spec, path.join(dir, "run"));
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

const ingest = (...more: string[]) => coldseam("ingest", yaml, "--db", db, "--workers", "1", ...more);
const folder = (): string => `${db}.cache`;

test("an ingest keeps its stages beside the database; `cache` says how much, and deletes it", () => {
  expect(coldseam("cache", "--db", db).out).toBe(`${folder()}: nothing is kept\n`);
  const first = ingest();
  expect(first.code, first.err).toBe(0);
  expect(coldseam("cache", "--db", db).out).toMatch(/: \d+\.\d MB in \d+ files; --clear deletes it/);
  const before = readdirSync(folder()).length;
  expect(ingest("--set", "loops.draws=500").code).toBe(0);
  expect(readdirSync(folder()).length).toBe(before);
  expect(coldseam("cache", "--db", db, "--clear").out).toMatch(/: \d+\.\d MB in \d+ files deleted\n$/);
  expect(existsSync(folder())).toBe(false);
  // Nothing is lost with it, and without it things go on as before.
  expect(coldseam("verify", "--db", db).code).toBe(0);
  expect(ingest("--set", "loops.draws=501", "--no-cache").code).toBe(0);
  expect(existsSync(folder())).toBe(false);
  expect(ingest("--set", "loops.draws=502", "--cache-mb", "0")).toMatchObject({
    code: 0,
    err: expect.stringMatching(/note: cache: nothing is added: the limit is too small\n/) as string,
  });
  expect(ingest("--cache-mb", "much")).toMatchObject({ code: 2 });
});

test("a second identical ingest costs the hashing of its files: no stage is even loaded", async () => {
  const { ingest: again } = await import("../../src/cli/ingest.js");
  // The analysis was stored by the test before.
  vi.doMock("../../src/analyse.js", () => {
    throw new Error("the stages were loaded");
  });
  const out = vi.spyOn(process.stdout, "write").mockReturnValue(true);
  try {
    expect(await again(yaml, { db })).toBe(1);
    expect(String(out.mock.calls[0]?.[0])).toMatch(/already in .* as analysis 1/);
    // The same test must fail where work is to be done.
    await expect(again(yaml, { db, set: ["loops.draws=503"] })).rejects.toThrow();
  } finally {
    out.mockRestore();
    vi.doUnmock("../../src/analyse.js");
  }
  expect(existsSync(folder()) && readdirSync(folder()).length > 1).toBe(false);
});
