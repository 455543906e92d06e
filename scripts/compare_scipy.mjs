// `npm run compare [-- --seed N]`: random input, fresh each day unless a seed is given, to SciPy and scikit-image and to ours; a table
// of the differences, each with what is allowed and why. Exit 1 where one is larger. Nothing happens where they are not installed.
import { spawnSync } from "node:child_process";
import { mkdirSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { findPython, pythonEnv } from "./find_python.mjs";
import { ensureBuilt, ensureInstalled, top } from "./install_if_missing.mjs";

ensureInstalled();
if (process.env.COLDSEAM_NO_BUILD !== "1") ensureBuilt();

const at = process.argv.indexOf("--seed");
const today = Number(new Date().toISOString().slice(0, 10).replaceAll("-", ""));
const seed = at < 0 ? today : Number(process.argv[at + 1]);
if (!Number.isInteger(seed)) {
  console.error("compare: --seed takes a whole number");
  process.exit(2);
}
const python = findPython(["numpy", "scipy", "skimage"]);
if (python === null) {
  console.log("skipped: no Python with scipy and skimage here (on Debian: python3-scipy, python3-skimage)");
  process.exit(0);
}

const { makeRandom, childSeed } = await import("../dist/numerics/random.js");
const TOPICS = {
  registration: (await import("./compare/registration.mjs")).makeRegistration,
  contours: (await import("./compare/contours.mjs")).makeContours,
  labels: (await import("./compare/labels.mjs")).makeLabels,
  fits: (await import("./compare/fits.mjs")).makeFits,
  functions: (await import("./compare/functions.mjs")).makeFunctions,
  statistics: (await import("./compare/statistics.mjs")).makeStatistics,
  blur: (await import("./compare/blur.mjs")).makeBlur,
};
const { writeNpy } = await import("./compare/npy.mjs");

const { versions } = python;
console.log(
  `seed ${seed} (npm run compare -- --seed ${seed}); SciPy ${versions.scipy}, scikit-image ${versions.skimage}, NumPy ${versions.numpy}, Python ${versions.python}`,
);
const folder = mkdtempSync(path.join(tmpdir(), "coldseam-compare-"));
try {
  const asked = {};
  Object.entries(TOPICS).forEach(([topic, make], k) => {
    mkdirSync(path.join(folder, topic));
    asked[topic] = make(makeRandom(childSeed(seed, k)), (name, data, shape) =>
      writeNpy(path.join(folder, topic, `${name}.npy`), data, shape),
    );
  });
  const questions = Object.fromEntries(Object.entries(asked).map(([topic, a]) => [topic, a.input]));
  writeFileSync(path.join(folder, "questions.json"), JSON.stringify(questions));
  const r = spawnSync(python.command, [path.join(top, "scripts/compare_scipy.py"), folder], {
    stdio: ["ignore", "inherit", "inherit"],
    env: pythonEnv(),
  });
  if (r.status !== 0) throw new Error("the Python script failed");
  const answers = JSON.parse(readFileSync(path.join(folder, "answers.json"), "utf8"));

  const rows = Object.entries(asked).flatMap(([topic, a]) => a.compare(answers[topic]));
  const width = Math.max(...rows.map((r) => r.what.length));
  console.log(`    ${"largest difference of".padEnd(width)}  values      found    allowed  because`);
  for (const r of rows)
    console.log(
      `${r.holds ? "ok " : "OFF"} ${r.what.padEnd(width)} ${String(r.cases).padStart(7)} ${r.difference.toExponential(2).padStart(10)} ${r.tolerance.toExponential(1).padStart(10)}  ${r.why}`,
    );
  const off = rows.filter((r) => !r.holds).length;
  console.log(
    off === 0 ? `all ${rows.length} within what is allowed` : `${off} of ${rows.length} beyond what is allowed`,
  );
  process.exitCode = off === 0 ? 0 : 1;
} finally {
  rmSync(folder, { recursive: true, force: true });
}
