// Two workers against one.
import path from "node:path";
import { generatedCooldown } from "./data.mjs";
import { atLeast, seconds } from "./goals.mjs";
import { measuredIn, withFolder } from "./run_child.mjs";

export async function benchWorkers() {
  const yaml = await generatedCooldown(256, 24);
  await withFolder(async (folder) => {
    const [one, two] = [1, 2].map((n) => measuredIn("ingest_child.mjs", [yaml, path.join(folder, `${n}.sqlite`), n]));
    // What both cost in CPU says what the gain would be if nothing else ran and no core ever waited.
    const atBest = (2 * one.whole.cpuS) / two.whole.cpuS;
    const gain = one.whole.wallS / two.whole.wallS;
    console.log("\nWorkers: 24 frames of 256 × 256");
    console.log(
      `  one: ${seconds(one.whole.wallS)} (CPU ${seconds(one.whole.cpuS)}); two: ${seconds(two.whole.wallS)} (CPU ${seconds(two.whole.cpuS)})`,
    );
    console.log(
      `  gain ${gain.toFixed(2)} ${atLeast(gain, 1.8)}, at best ${atBest.toFixed(2)} by the CPU seconds; by stage ${Object.keys(
        one.stages,
      )
        .map((s) => `${s} ${(one.stages[s].wallS / two.stages[s].wallS).toFixed(2)}`)
        .join(", ")}`,
    );
  });
}
