// `npm run study`: the accuracy study on simulated cooldowns; `-- --write` puts its tables into DEVELOPERS.md.
import path from "node:path";
import { ensureBuilt, ensureInstalled, top } from "./install_if_missing.mjs";

ensureInstalled();
ensureBuilt();
const { runStudy } = await import("../dist/study/main.js");
process.exitCode = await runStudy(process.argv.slice(2), path.join(top, "DEVELOPERS.md"));
