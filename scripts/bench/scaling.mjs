// How time grows with frames and with pixels: the exponent of a power law through the CPU seconds.
import path from "node:path";
import { generatedCooldown } from "./data.mjs";
import { atMost, printTable } from "./goals.mjs";
import { measuredIn, withFolder } from "./run_child.mjs";

/** Slope of log y over log x by least squares. */
function exponent(x, y) {
  const [a, b] = [x, y].map((v) => v.map(Math.log));
  const mean = (v) => v.reduce((s, t) => s + t, 0) / v.length;
  const [ma, mb] = [mean(a), mean(b)];
  return a.reduce((s, t, k) => s + (t - ma) * (b[k] - mb), 0) / a.reduce((s, t) => s + (t - ma) ** 2, 0);
}

async function series(title, cases, of) {
  const runs = [];
  for (const [size, frames] of cases) {
    const yaml = await generatedCooldown(size, frames);
    runs.push(
      await withFolder((folder) => measuredIn("ingest_child.mjs", [yaml, path.join(folder, "bench.sqlite"), 2])),
    );
  }
  console.log(`\nScaling with ${title}`);
  const f = (v) => v.toFixed(2);
  printTable([
    ["frames × pixels", "s", "CPU s", "MiB", "profiles"],
    ...cases.map(([size, frames], k) => [
      `${frames} × ${size}²`,
      f(runs[k].whole.wallS),
      f(runs[k].whole.cpuS),
      runs[k].peakMiB.toFixed(0),
      runs[k].profiles,
    ]),
  ]);
  const x = cases.map(of);
  const e = exponent(
    x,
    runs.map((r) => r.whole.cpuS),
  );
  console.log(
    `  exponent of the CPU time ${f(e)} ${atMost(e, 1.1)}; of its last step ${f(
      exponent(
        x.slice(-2),
        runs.slice(-2).map((r) => r.whole.cpuS),
      ),
    )}`,
  );
  const stages = Object.keys(runs[0].stages).filter((s) => runs.at(-1).stages[s].cpuS > 0.02 * runs.at(-1).whole.cpuS);
  console.log(
    `  by stage: ${stages
      .map(
        (s) =>
          `${s} ${f(
            exponent(
              x,
              runs.map((r) => Math.max(1e-3, r.stages[s].cpuS)),
            ),
          )}`,
      )
      .join(", ")}`,
  );
}

export async function benchScaling() {
  await series(
    "frames, 128 × 128",
    [
      [128, 25],
      [128, 100],
      [128, 400],
    ],
    ([, frames]) => frames,
  );
  await series(
    "pixels, six frames",
    [
      [128, 6],
      [256, 6],
      [512, 6],
      [1024, 6],
    ],
    ([size]) => size ** 2,
  );
}

/** Peak memory of a very long cooldown; the growth with frames is what it shows. */
export async function benchMemory() {
  const yaml = await generatedCooldown(256, 2000);
  const r = await withFolder((folder) => measuredIn("ingest_child.mjs", [yaml, path.join(folder, "bench.sqlite"), 2]));
  console.log(
    `\nMemory: 2,000 frames of 256 × 256: ${r.peakMiB.toFixed(0)} MiB, ${r.whole.wallS.toFixed(0)} s (CPU ${r.whole.cpuS.toFixed(0)} s)`,
  );
}
