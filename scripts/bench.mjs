// `npm run bench`: ingest time by stage and peak memory on generated cooldowns, beside a pass over the same bytes.
import { spawnSync } from "node:child_process";
import { existsSync, mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { ensureBuilt, ensureInstalled, top } from "./install_if_missing.mjs";

ensureInstalled();
ensureBuilt();

const CASES = {
  256: { size: 256, frames: 24 },
  512: { size: 512, frames: 80 },
};
const wanted = process.argv.slice(2).filter((a) => a in CASES);
const names = wanted.length > 0 ? wanted : Object.keys(CASES);
const { defaultSpec, generateStack, readTruth } = await import("../dist/demo/index.js");
// Kept between runs: making the large cooldown takes longer than analysing it.
const data = path.join(tmpdir(), "coldseam-bench");

/** Evenly spread temperatures through the transition, down and up again. */
function series(frames) {
  const n = frames / 2;
  const t = Array.from({ length: n }, (_, k) => 135 + (45 * k) / (n - 1));
  return [
    { branch: "cooling", temperaturesK: [...t].reverse() },
    { branch: "warming", temperaturesK: t },
  ];
}

for (const name of names) {
  const { size, frames } = CASES[name];
  const dir = path.join(data, `${size}-${frames}`);
  const yaml = path.join(dir, "cooldown.yaml");
  if (!existsSync(path.join(dir, "truth/truth.json"))) {
    console.error(`making ${frames} frames of ${size} × ${size} …`);
    generateStack(
      defaultSpec({ cooldown: `bench-${size}-${frames}`, rows: size, cols: size, series: series(frames), seed: 5 }),
      dir,
    );
  }
  const scratch = mkdtempSync(path.join(tmpdir(), "coldseam-bench-run-"));
  const r = spawnSync(
    process.execPath,
    [path.join(top, "scripts/bench_one.mjs"), yaml, path.join(scratch, "bench.sqlite")],
    {
      encoding: "utf8",
      stdio: ["ignore", "pipe", "inherit"],
    },
  );
  rmSync(scratch, { recursive: true, force: true });
  if (r.status !== 0) process.exit(r.status ?? 1);
  const b = JSON.parse(r.stdout);
  const truth = readTruth(dir);
  console.log(`\n${frames} frames of ${size} × ${size}, three channels, ${b.workers} workers (${truth.cooldown})`);
  console.log(`  first: the answer is right? ${b.right.join("; ")}`);
  console.log("  stage        s     ms a frame   times a pass over the same bytes");
  for (const [stage, ms] of Object.entries(b.stages))
    console.log(
      `  ${stage.padEnd(10)} ${(ms / 1000).toFixed(2).padStart(6)} ${(ms / frames).toFixed(1).padStart(10)} ${(ms / b.passMs).toFixed(0).padStart(14)}`,
    );
  console.log(
    `  whole      ${(b.wholeMs / 1000).toFixed(2).padStart(6)} ${(b.wholeMs / frames).toFixed(1).padStart(10)} ${(b.wholeMs / b.passMs).toFixed(0).padStart(14)}`,
  );
  console.log(
    `  a pass over the same bytes (copy of three float32 channels): ${(b.passMs / frames).toFixed(2)} ms a frame`,
  );
  console.log(`  peak memory, all threads: ${b.peakMiB.toFixed(0)} MiB; ${b.profiles} profiles`);
}
