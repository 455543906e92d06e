// Compiles src/ to dist/.
import { spawnSync } from "node:child_process";
import { fileURLToPath } from "node:url";
import path from "node:path";

const top = path.dirname(path.dirname(fileURLToPath(import.meta.url)));
const run = spawnSync(process.execPath, [path.join(top, "node_modules/typescript/bin/tsc"), "-p", top], {
  stdio: "inherit",
  cwd: top,
});
process.exit(run.status ?? 1);
