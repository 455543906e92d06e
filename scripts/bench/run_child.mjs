// One measurement in a process of its own, so that its memory and its warm-up are its own.
import { spawnSync } from "node:child_process";
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { top } from "../install_if_missing.mjs";

/** Runs scripts/bench/`script` with `args`; what it prints on standard output is JSON, and is returned parsed. */
export function measuredIn(script, args) {
  const r = spawnSync(process.execPath, [path.join(top, "scripts/bench", script), ...args.map(String)], {
    encoding: "utf8",
    stdio: ["ignore", "pipe", "inherit"],
    maxBuffer: 1 << 28,
  });
  if (r.status !== 0) throw new Error(`${script} ended with ${r.status ?? r.signal}`);
  return JSON.parse(r.stdout);
}

/** Wall seconds, CPU seconds of all threads, and peak memory of `node ARGS`, its output thrown away. */
export function timedNode(args) {
  const folder = mkdtempSync(path.join(tmpdir(), "coldseam-bench-run-"));
  const file = path.join(folder, "use.json");
  const begin = performance.now();
  const r = spawnSync(process.execPath, ["--require", path.join(top, "scripts/bench/at_exit.cjs"), ...args], {
    stdio: ["ignore", "ignore", "pipe"],
    env: { ...process.env, COLDSEAM_BENCH_USE: file },
  });
  const wallS = (performance.now() - begin) / 1000;
  try {
    if (r.status !== 0) throw new Error(`node ${args.join(" ")}: ${String(r.stderr)}`);
    return { wallS, ...JSON.parse(readFileSync(file, "utf8")) };
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

/** The least of `times` runs: other work on the machine only ever adds. */
export function leastOf(times, run) {
  const all = Array.from({ length: times }, run);
  return {
    wallS: Math.min(...all.map((r) => r.wallS)),
    cpuS: Math.min(...all.map((r) => r.cpuS)),
    peakMiB: Math.max(...all.map((r) => r.peakMiB)),
  };
}

export const withFolder = async (work) => {
  const folder = mkdtempSync(path.join(tmpdir(), "coldseam-bench-run-"));
  try {
    return await work(folder);
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
};
