import { spawnSync } from "node:child_process";
import { existsSync, mkdirSync, mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterEach, beforeEach, expect, test } from "vitest";
import { makeScratch, removeAbandoned, removeScratch } from "../../src/workers/scratch.js";

let dir: string;
beforeEach(() => (dir = mkdtempSync(path.join(tmpdir(), "scratch-test-"))));
afterEach(() => rmSync(dir, { recursive: true, force: true }));

const DAY = 24 * 3600 * 1000;

test("what a killed run has left is removed a week later, and nothing else", () => {
  // A process that has ended: its number is free.
  const gone = Number(spawnSync(process.execPath, ["-p", "process.pid"], { encoding: "utf8" }).stdout);
  const left = `coldseam-${gone}-aBc123`;
  const others = [
    `coldseam-${process.pid}-aBc123`,
    "coldseam-notes",
    `other-${gone}-aBc123`,
    `coldseam-${gone}-aBc123-keep`,
  ];
  for (const name of [left, ...others]) {
    mkdirSync(path.join(dir, name));
    writeFileSync(path.join(dir, name, "clean-0"), "values");
  }
  removeAbandoned(dir, Date.now() + 6 * DAY);
  expect(existsSync(path.join(dir, left))).toBe(true);
  removeAbandoned(dir, Date.now() + 8 * DAY);
  expect(existsSync(path.join(dir, left))).toBe(false);
  for (const name of others) expect(existsSync(path.join(dir, name, "clean-0"))).toBe(true);
});

test("a scratch folder carries the number of its process", () => {
  const made = makeScratch();
  expect(path.basename(made)).toMatch(new RegExp(`^coldseam-${process.pid}-\\w{6}$`));
  removeScratch(made);
  expect(existsSync(made)).toBe(false);
});
