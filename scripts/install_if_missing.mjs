// Installs the locked dependencies and builds, where that has not been done. Uses nothing outside Node itself.
import { spawnSync } from "node:child_process";
import { existsSync, readFileSync, statSync, readdirSync } from "node:fs";
import { fileURLToPath } from "node:url";
import path from "node:path";

export const top = path.dirname(path.dirname(fileURLToPath(import.meta.url)));

function run(command, args) {
  const r = spawnSync(command, args, { cwd: top, stdio: ["ignore", 2, 2] });
  if (r.status !== 0) {
    console.error(`coldseam: \`${command} ${args.join(" ")}\` failed`);
    process.exit(r.status ?? 1);
  }
}

function installedLock() {
  try {
    return readFileSync(path.join(top, "node_modules/.package-lock.json"), "utf8");
  } catch {
    return null;
  }
}

/** True where each package of the lock file stands in node_modules in its locked version. */
function installed() {
  const text = installedLock();
  if (text === null || !existsSync(path.join(top, "node_modules/typescript/bin/tsc"))) return false;
  const wanted = JSON.parse(readFileSync(path.join(top, "package-lock.json"), "utf8")).packages;
  const have = JSON.parse(text).packages;
  return Object.entries(wanted).every(([k, v]) => k === "" || v.optional || have[k]?.version === v.version);
}

export function ensureInstalled() {
  const [major, minor] = process.versions.node.split(".").map(Number);
  if (major < 20 || (major === 20 && minor < 19)) {
    console.error(`coldseam: needs Node.js 20.19 or newer, this is ${process.versions.node}`);
    process.exit(1);
  }
  // An installed package brings its build and has had its libraries installed by npm; only a clone has src/.
  if (!existsSync(path.join(top, "src"))) return;
  if (!installed()) {
    console.error("coldseam: installing the libraries (once; a minute or two) …");
    run("npm", ["ci", "--no-audit", "--no-fund"]);
  }
}

function newest(dir) {
  let t = 0;
  for (const e of readdirSync(dir, { withFileTypes: true })) {
    const p = path.join(dir, e.name);
    t = Math.max(t, e.isDirectory() ? newest(p) : statSync(p).mtimeMs);
  }
  return t;
}

export function ensureBuilt() {
  if (!existsSync(path.join(top, "src"))) return;
  const main = path.join(top, "dist/cli/main.js");
  if (existsSync(main) && statSync(main).mtimeMs >= newest(path.join(top, "src"))) return;
  run(process.execPath, [path.join(top, "scripts/build.mjs")]);
}
