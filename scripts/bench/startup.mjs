// Starting the program beside starting Node.
import path from "node:path";
import { top } from "../install_if_missing.mjs";
import { leastOf, timedNode } from "./run_child.mjs";
import { seconds } from "./goals.mjs";

export const program = path.join(top, "scripts/coldseam.mjs");

export function benchStartup() {
  const nothing = leastOf(9, () => timedNode(["-e", "0"]));
  const help = leastOf(9, () => timedNode([program, "--help"]));
  const both = (m) => `${seconds(m.wallS)} (CPU ${seconds(m.cpuS)})`;
  console.log("\nStart-up, the least of nine");
  console.log(
    `  node -e 0: ${both(nothing)}; coldseam --help: ${both(help)}, ${(help.wallS / nothing.wallS).toFixed(1)} times as long; ${help.peakMiB.toFixed(0)} MiB`,
  );
}
