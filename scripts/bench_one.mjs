// One measured ingest in a process of its own, so that its peak memory is its own. Prints JSON.
import { availableParallelism } from "node:os";
import path from "node:path";
import { readCooldown, loadFrame } from "../dist/input/index.js";
import { analyse } from "../dist/analyse.js";
import { settingsWith } from "../dist/settings.js";
import { openForWriting } from "../dist/store/open.js";
import { saveAnalysis } from "../dist/store/save.js";
import { scoreCooldown } from "../dist/study/score.js";
import { promisesOf } from "../dist/cli/demo_run.js";
import { readTruth } from "../dist/demo/index.js";

const [yaml, dbFile] = process.argv.slice(2);
const workers = availableParallelism();
const stages = {};
let last = performance.now();
const begin = last;
let current = "reading";
const onStage = (stage) => {
  const now = performance.now();
  stages[current] = (stages[current] ?? 0) + now - last;
  last = now;
  current = stage;
};

const cooldown = await readCooldown(yaml);
const analysis = await analyse(cooldown, { settings: settingsWith(), programVersion: "bench", workers, onStage });
onStage("storing");
const db = openForWriting(dbFile);
saveAnalysis(db, analysis, new Date(0));
onStage("done");
const wholeMs = performance.now() - begin;
const peakMiB = process.resourceUsage().maxRSS / 1024;

const truth = readTruth(path.dirname(yaml));
const right = promisesOf(scoreCooldown(db, truth), truth.hasFringes).map(
  (p) => `${p.holds ? "ok" : "OFF"} ${p.what} ${p.found}`,
);
db.close();

// The floor: copying the same bytes, in one thread, best of some.
const raw = await loadFrame(cooldown, cooldown.frames[0]);
const channels = [raw.topography, raw.amplitude, raw.phase].filter((c) => c !== null).map((c) => c.values.data);
let best = Infinity;
for (let k = 0; k < 20; k++) {
  const t = performance.now();
  for (const c of channels) {
    const copy = new Float32Array(c.length);
    for (let i = 0; i < c.length; i++) copy[i] = c[i];
  }
  best = Math.min(best, performance.now() - t);
}
const passMs = best * cooldown.frames.length;
const profiles = analysis.frames.reduce((n, f) => n + f.profiles.length, 0);
process.stdout.write(JSON.stringify({ stages, wholeMs, peakMiB, passMs, workers, profiles, right }));
