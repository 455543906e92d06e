// A run of its own with little memory: the thread that hoards must end, the process must not.
import path from "node:path";
import { fileURLToPath } from "node:url";
import { makeRunner } from "../../dist/workers/pool.js";

const here = path.dirname(fileURLToPath(import.meta.url));
const runner = makeRunner(2, { file: path.join(here, "exiting_worker.mjs") });
try {
  await runner.map(
    "levels",
    [0, 1, 2, 3].map((frame) => ({ frame, how: "memory" })),
  );
} catch (e) {
  console.log(`${e.name}: ${e.problems[0].at}: ${e.problems[0].problem}`);
} finally {
  await runner.close();
}
