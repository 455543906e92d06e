// `npm run demo`: makes the demo cooldowns, ingests them, shows the loops and writes all tables.
import { ensureBuilt, ensureInstalled } from "./install_if_missing.mjs";

ensureInstalled();
ensureBuilt();
const { runDemo } = await import("../dist/cli/demo_run.js");
process.exitCode = await runDemo(process.argv.slice(2));
