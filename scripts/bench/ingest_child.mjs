// One measured ingest: ingest_child.mjs COOLDOWN.yaml DATABASE WORKERS. Prints JSON: seconds and CPU seconds by stage, memory, score.
import { statSync } from "node:fs";
import path from "node:path";
import { readCooldown } from "../../dist/input/index.js";
import { analyse } from "../../dist/analyse.js";
import { settingsWith } from "../../dist/settings.js";
import { openForWriting } from "../../dist/store/open.js";
import { saveAnalysis } from "../../dist/store/save.js";
import { scoreCooldown } from "../../dist/study/score.js";
import { readTruth } from "../../dist/demo/index.js";

const [yaml, dbFile, workers] = process.argv.slice(2);
const now = () => {
  const { user, system } = process.cpuUsage();
  return { wallS: performance.now() / 1000, cpuS: (user + system) / 1e6 };
};
const stages = {};
const begin = now();
let last = begin;
let current = "reading";
const onStage = (stage) => {
  const t = now();
  const s = (stages[current] ??= { wallS: 0, cpuS: 0 });
  s.wallS += t.wallS - last.wallS;
  s.cpuS += t.cpuS - last.cpuS;
  last = t;
  current = stage;
};

const cooldown = await readCooldown(yaml);
const analysis = await analyse(cooldown, {
  settings: settingsWith(),
  programVersion: "bench",
  workers: Number(workers),
  onStage,
});
onStage("storing");
const db = openForWriting(dbFile);
saveAnalysis(db, analysis, new Date(0));
onStage("done");
const whole = { wallS: last.wallS - begin.wallS, cpuS: last.cpuS - begin.cpuS };
const peakMiB = process.resourceUsage().maxRSS / 1024;
const tableBytes = Object.fromEntries(
  db
    .prepare("SELECT name, sum(pgsize) AS bytes FROM dbstat GROUP BY name")
    .all()
    .map((t) => [t.name, t.bytes]),
);
const score = scoreCooldown(db, readTruth(path.dirname(yaml)));
db.close();

const profiles = analysis.frames.reduce((n, f) => n + f.profiles.length, 0);
const bytes = cooldown.frames.length * 3 * 4 * readTruth(path.dirname(yaml)).spec.rows ** 2;
const copy = new Float32Array(bytes / 4 / cooldown.frames.length);
const source = Float32Array.from(copy, (_, i) => i);
let passS = Infinity;
for (let k = 0; k < 30; k++) {
  const t = performance.now();
  for (let i = 0; i < copy.length; i++) copy[i] = source[i];
  passS = Math.min(passS, ((performance.now() - t) / 1000) * cooldown.frames.length);
}
const data = { stages, whole, peakMiB, passS, profiles, score, tableBytes, databaseBytes: statSync(dbFile).size };
process.stdout.write(JSON.stringify(data));
