import { mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, expect, test } from "vitest";
import { parse } from "yaml";
import { defaultSpec, generateStack } from "../../src/demo/index.js";
import { coldseam } from "./program.js";

let dir: string;
let yaml: string;
let found: Found;

/** One frame of one state with four particles under a 30 nm tip. */
const particle = (xNm: number, yNm: number, radiusNm: number, amplitudeFactor: number) => ({
  xNm,
  yNm,
  radiusNm,
  amplitudeFactor,
  lengthNm: 0,
  angleDeg: 0,
  heightNm: 12,
  phaseShiftRad: 0.2,
});

beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-tip-"));
  const spec = defaultSpec({
    cooldown: "kv21-run1",
    rows: 100,
    cols: 100,
    series: [{ branch: "cooling", temperaturesK: [190] }],
    unmeasured: { chance: 0 },
    debris: {
      list: [
        particle(250, 260, 36, 0.3),
        particle(700, 250, 33, 0.4),
        particle(260, 720, 26, 1.8),
        particle(720, 730, 16, 0.5),
      ],
    },
  });
  yaml = generateStack(spec, path.join(dir, "run"));
  const search = coldseam("tip", yaml, "--frame", "0", "--find", "--format", "json");
  if (search.code !== 0) throw new Error(search.err);
  found = JSON.parse(search.out) as Found;
}, 120_000);
afterAll(() => rmSync(dir, { recursive: true, force: true }));

interface Found {
  together: { resolution_low_nm: number; resolution_high_nm: number } | null;
  candidates: { from_nm: [number, number]; to_nm: [number, number]; resolution_nm: number; model: string }[];
}

test("--find proposes lines; a proposed line measures what was promised, and its YAML lines can be pasted", () => {
  const best = found.candidates[0];
  expect(best).toBeDefined();
  const line = ["--from", best.from_nm.join(","), "--to", best.to_nm.join(",")];
  const r = coldseam("tip", yaml, "--frame", "0", ...line);
  expect(r.code, r.err).toBe(0);
  expect(r.out).toContain("resolution (FWHM)");
  const pasted = r.out.slice(r.out.indexOf("tip:\n"));
  const tip = (parse(pasted) as { tip: { resolution_nm: number; resolution_sd_nm: number } }).tip;
  expect(tip.resolution_nm).toBeCloseTo(best.resolution_nm, 1);
  // the simulated tip is 30 nm
  expect(Math.abs(tip.resolution_nm - 30)).toBeLessThan(3.5 * tip.resolution_sd_nm);
  expect(Math.max(...r.out.split("\n").map((l) => l.length))).toBeLessThanOrEqual(120);
  // back in the file, the program takes it
  const own = path.join(dir, "run/own.yaml");
  writeFileSync(own, readFileSync(yaml, "utf8").replace(/^tip:\n(?: .*\n)+/m, pasted));
  expect(coldseam("check", own).code).toBe(0);
});

test("the text of --find lists them with a command that runs", () => {
  const r = coldseam("tip", yaml, "--frame", "0", "--find", "--count", "3");
  expect(r.code, r.err).toBe(0);
  const command = /^measure one: coldseam (.*)$/m.exec(r.out)?.[1];
  expect(command).toBeDefined();
  expect(coldseam(...(command as string).split(" ")).code).toBe(0);
});

test("json of one line holds every figure and the warnings", () => {
  const best = found.candidates[0];
  const r = coldseam(
    "tip",
    yaml,
    "--frame",
    "0",
    "--channel",
    "amplitude",
    "--width",
    "50",
    "--raw",
    "--format",
    "json",
    "--from",
    best.from_nm.join(","),
    "--to",
    best.to_nm.join(","),
  );
  const one = JSON.parse(r.out) as Record<string, unknown>;
  expect(one).toMatchObject({ cooldown: "kv21-run1", frame: 0, channel: "amplitude", line_width_nm: 50 });
  for (const key of [
    "resolution_nm",
    "resolution_sd_nm",
    "resolution_low_nm",
    "resolution_high_nm",
    "reduced_chi2",
    "pixels",
  ])
    expect(typeof one[key]).toBe("number");
  expect((one["warnings"] as { code: string }[]).map((w) => w.code)).toContain("relief");
  expect(r.err).toContain("warning: the height changes");
});

test("a wrong command line ends with 2, a line over nothing with 1; both say what to do", () => {
  const line = ["--from", "10,10", "--to", "200,10"];
  for (const [args, says] of [
    [["--frame", "0"], "--from X,Y"],
    [["--frame", "99", ...line], "frames 0 to 0"],
    [["--frame", "0", "--from", "10", "--to", "20,30"], "expected X,Y in nm"],
    [["--frame", "0", "--from", "10,10", "--to", "10,10"], "same point"],
    [["--frame", "0", ...line, "--width", "-3"], "above 0"],
    [line, "--frame"],
  ] as const) {
    const r = coldseam("tip", yaml, ...args);
    expect(r).toMatchObject({ code: 2, out: "" });
    expect(r.err).toContain(says);
  }
  const away = coldseam("tip", yaml, "--frame", "0", "--from", "800,900", "--to", "1300,900");
  expect(away).toMatchObject({ code: 1, out: "" });
  expect(away.err).toContain("leaves the frame, which reaches from 0,0 to 990,990 nm");
  expect(away.err).toContain("fix: ");
  expect(coldseam("tip", path.join(dir, "none.yaml"), "--frame", "0", "--find").code).toBe(1);
});
