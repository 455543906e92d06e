#!/usr/bin/env node
// The program's entry point: from a clone it installs and builds what is missing first.
import { ensureBuilt, ensureInstalled } from "./install_if_missing.mjs";

ensureInstalled();
ensureBuilt();
const { main } = await import("../dist/cli/main.js");
await main(process.argv);
