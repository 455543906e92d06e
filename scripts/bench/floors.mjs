// Floors: what parts of the work cost beside the least that could be done with the same bytes or numbers.
import { generatedCooldown } from "./data.mjs";
import { atMost } from "./goals.mjs";
import { measuredIn } from "./run_child.mjs";

export async function benchFloors() {
  const yaml = await generatedCooldown(512, 6);
  const b = measuredIn("floors_child.mjs", [yaml]);
  console.log("\nFloors, one thread, the least of several runs");
  console.log(`  a plain copy of a frame of 512 × 512, three float32 channels: ${b.copyMs.toFixed(2)} ms`);
  for (const [name, ms] of [
    ["cleaning a frame", b.cleanMs],
    ["levels and map of the states of a frame", b.statesMs],
  ])
    console.log(`  ${name}: ${ms.toFixed(1)} ms, ${(ms / b.copyMs).toFixed(0)} copies ${atMost(ms / b.copyMs, 30)}`);
  console.log(`  300 × 10 Math.tanh: ${b.tanhUs.toFixed(1)} µs`);
  console.log(
    `  wall fit, 300 pixels, five parameters: ${b.fitUs.toFixed(1)} µs ${atMost(b.fitUs, 60, " µs")}, ${(b.fitUs / b.tanhUs).toFixed(2)} of those ${atMost(b.fitUs / b.tanhUs, 3)}`,
  );
  console.log(
    `  one evaluation of its model with all derivatives: ${b.evaluationUs.toFixed(1)} µs, ${(b.evaluationUs / (b.tanhUs / 10)).toFixed(2)} of 300 Math.tanh; ${b.evaluations.toFixed(1)} a fit`,
  );
}
