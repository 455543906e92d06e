import { afterAll, expect, test } from "vitest";
import { readFileSync } from "node:fs";
import { noticeLines } from "../../src/cli/notice_lines.js";
import type { Notice } from "../../src/model/cooldown.js";
import { CooldownFolder } from "../input/folder.js";
import { coldseam } from "./program.js";

const folder = new CooldownFolder();
afterAll(() => folder.remove());

const spans = (frame: number, label: string, nm: string): Notice => ({
  frame,
  code: "topography-unit",
  message: `topography (${label}): spans ${nm} nm: is its unit right?`,
  varies: [label, nm],
});

test("a remark that differs only in its file and a number is one line, with the range of both", () => {
  const notices = [8, 3, 9, 10, 0].map((f) => spans(f, `t.tif#${f}`, `${1 + f / 10}e+7`));
  expect(noticeLines(notices)).toEqual([
    "note: frames 0, 3, 8 to 10: topography (t.tif#8 … t.tif#0): spans 1e+7 to 2e+7 nm: is its unit right?",
  ]);
  expect(noticeLines(notices.slice(0, 1))).toEqual([
    "note: frame 8: topography (t.tif#8): spans 1.8e+7 nm: is its unit right?",
  ]);
});

test("what differs otherwise stays apart; what is equal is one, and nothing in it steers a terminal", () => {
  const equal = (frame: number | null, code: string, message: string): Notice => ({ frame, code, message });
  expect(
    noticeLines([
      spans(1, "a.tif", "5"),
      { ...spans(2, "b.tif", "5"), message: "phase (b.tif): spans 5 nm: is its unit right?" },
      equal(1, "x", "odd\u001b[1m"),
      equal(2, "x", "odd\u001b[1m"),
      equal(4, "y", "odd\u001b[1m"),
      equal(null, "tip-below-pixel", "too fine"),
    ]),
  ).toEqual([
    "note: frame 1: topography (a.tif): spans 5 nm: is its unit right?",
    "note: frame 2: phase (b.tif): spans 5 nm: is its unit right?",
    "note: frames 1, 2: odd\\x1b[1m",
    "note: frame 4: odd\\x1b[1m",
    "warning: too fine",
  ]);
});

test("shares, some of them small, give a range too", () => {
  const low = (frame: number, share: string): Notice => ({
    frame,
    code: "negative-amplitude",
    message: `${share} of the pixels lie below zero`,
    varies: [share],
  });
  expect(noticeLines([low(0, "12.0 %"), low(1, "less than 0.1 %"), low(2, "3.0 %")])).toEqual([
    "note: frames 0 to 2: less than 0.1 % to 12.0 % of the pixels lie below zero",
  ]);
});

test("`check` says a remark of all frames once; a page without a pixel can be left out as it says", () => {
  const wave = (i: number, j: number): number => Math.sin(i * 0.7) + Math.cos(j * 0.9) + 0.1 * Math.sin(i * j);
  folder.stack("a.tif", 4, 64, 64, (p, i, j) => (p === 2 ? NaN : 5 + wave(i, j + p)));
  folder.stack("t.tif", 4, 64, 64, (p, i, j) => (1 + p / 10) * 1e7 * wave(i, j));
  folder.stack("p.tif", 4, 64, 64, () => NaN);
  const yaml = folder.text(
    "cooldown.yaml",
    `sample: S\ncooldown: c\nscan: { pixel_size_nm: [10, 10] }\nchannels: { topography: { unit: nm }, phase: { unit: rad } }\nseries:
- branch: cooling\n  temperatures_K: [180, 170, 160, 150]\n  stacks: { amplitude: a.tif, topography: t.tif, phase: p.tif }\n`,
  );
  const before = coldseam("check", yaml);
  expect(before.code).toBe(1);
  const entry = /a\.tif#2: amplitude without a single measured pixel\n {2}fix: .*`(- \{.*\})` under `exclude:`/.exec(
    before.err,
  )?.[1];
  folder.text("cooldown.yaml", `${readFileSync(yaml, "utf8")}exclude:\n${String(entry)}\n`);
  const after = coldseam("check", yaml);
  expect(after.code, after.err).toBe(0);
  expect(after.err.split("\n").filter((l) => /nm: is its unit|no measured/.test(l))).toEqual([
    expect.stringMatching(
      /^note: frames 0, 1, 3: topography \(t\.tif#0 … t\.tif#3\): spans \d\.\d\de\+7 to \d\.\d\de\+7 nm: is its unit right\?$/,
    ),
    "note: frames 0, 1, 3: phase (p.tif#0 … p.tif#3): no measured pixel, or one single value: counts as missing",
  ]);
  expect(after.out).toContain(`frames read, ${after.err.trim().split("\n").length} remarks`);
});
