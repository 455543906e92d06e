// Whole ingests beside the reference (scripts/reference.py) on the same files and the same machine, with the accuracy of both.
import { spawnSync } from "node:child_process";
import { availableParallelism } from "node:os";
import path from "node:path";
import { readTruth } from "../../dist/demo/index.js";
import { scoreTables } from "../../dist/study/score.js";
import { findPython, pythonEnv } from "../find_python.mjs";
import { top } from "../install_if_missing.mjs";
import { accuracyOf } from "./accuracy.mjs";
import { tablesIn } from "./csv_tables.mjs";
import { generatedCooldown } from "./data.mjs";
import { atMost, printTable } from "./goals.mjs";
import { measuredIn, withFolder } from "./run_child.mjs";

/** Stages of both put side by side: ours and theirs of one line do the same work. */
const STAGES = [
  ["reading, cleaning, debris, levels", ["reading", "cleaning", "debris", "levels"], ["reading", "cleaning"]],
  ["placing", ["placing"], ["placing"]],
  ["measuring", ["measuring"], ["measuring"]],
  ["histories, storing", ["histories", "storing"], ["histories", "storing"]],
];

function runReference(python, yaml, folder) {
  const r = spawnSync(python.command, [path.join(top, "scripts/reference.py"), yaml, folder], {
    encoding: "utf8",
    stdio: ["ignore", "pipe", "inherit"],
    env: pythonEnv(),
  });
  if (r.status !== 0) throw new Error("the reference failed");
  return { ...JSON.parse(r.stdout), score: scoreTables(tablesIn(folder), readTruth(path.dirname(yaml))) };
}

/** @param referenceS what the reference may take on two idle cores: a weaker one would flatter us */
export async function benchIngest(size, frames, referenceS) {
  const yaml = await generatedCooldown(size, frames);
  const workers = availableParallelism();
  const python = findPython(["numpy", "scipy", "skimage", "tifffile", "yaml"]);
  await withFolder(async (folder) => {
    const ours = measuredIn("ingest_child.mjs", [yaml, path.join(folder, "bench.sqlite"), workers]);
    const theirs = python === null ? null : runReference(python, yaml, path.join(folder, "tables"));
    console.log(`\nIngest: ${frames} frames of ${size} × ${size}, three channels, ${workers} workers`);
    if (theirs === null) console.log("  reference skipped: no Python with scipy, skimage, tifffile and yaml here");
    const f = (v) => (v === null || v === undefined ? "" : v.toFixed(2));
    const sum = (list, of) => list.reduce((s, name) => s + (of[name] ?? 0), 0);
    const wall = Object.fromEntries(Object.entries(ours.stages).map(([k, s]) => [k, s.wallS]));
    const cpu = Object.fromEntries(Object.entries(ours.stages).map(([k, s]) => [k, s.cpuS]));
    const ratio = (a, b) => (b > 0 ? (a / b).toFixed(2) : "");
    printTable([
      ["stage", "s", "CPU s", "reference s", "ratio", "passes"],
      ...STAGES.map(([name, mine, other]) => {
        const t = theirs === null ? null : sum(other, theirs.stages);
        const w = sum(mine, wall);
        return [name, f(w), f(sum(mine, cpu)), f(t), t === null ? "" : ratio(w, t), (w / ours.passS).toFixed(0)];
      }),
      [
        "whole",
        f(ours.whole.wallS),
        f(ours.whole.cpuS),
        f(theirs?.whole),
        theirs ? ratio(ours.whole.wallS, theirs.whole) : "",
        (ours.whole.wallS / ours.passS).toFixed(0),
      ],
      [
        "whole, CPU",
        f(ours.whole.cpuS),
        "",
        f(theirs?.cpu),
        theirs ? ratio(ours.whole.cpuS, theirs.cpu) : "",
        (ours.whole.cpuS / ours.passS).toFixed(0),
      ],
    ]);
    console.log("  passes: times a plain copy of the same three float32 channels");
    console.log(
      `  each stage of ours, s (CPU s): ${Object.entries(ours.stages)
        .map(([k, s]) => `${k} ${f(s.wallS)} (${f(s.cpuS)})`)
        .join(", ")}`,
    );
    console.log(
      `  peak memory: ${ours.peakMiB.toFixed(0)} MiB, all threads${theirs === null ? "" : `; the reference's largest process ${theirs.peak_mib.toFixed(0)} MiB`}`,
    );
    if (theirs !== null)
      console.log(
        `  the reference itself, its CPU seconds over two idle cores: ${(theirs.cpu / 2).toFixed(1)} s ${atMost(theirs.cpu / 2, referenceS, " s")}`,
      );
    const bytes = (name) => ((ours.tableBytes[name] ?? 0) / ours.profiles).toFixed(0);
    console.log(
      `  database: ${(ours.databaseBytes / ours.profiles).toFixed(0)} bytes a profile, of which its row ${bytes("profile")}, its drawing ${bytes("profile_bins")}; the rest are previews (${bytes("preview")}), drawings of fringes (${bytes("fringe_bins")}), maps and domains`,
    );
    const mine = accuracyOf(ours.score);
    const other = theirs === null ? null : accuracyOf(theirs.score);
    printTable([
      ["against the truth", "coldseam", ...(other === null ? [] : ["reference"])],
      ...mine.map(([what, v], k) => [what, v, ...(other === null ? [] : [other[k][1]])]),
    ]);
  });
}
