// `npm test`: installs what is missing, builds, checks format and lint, runs the tests; ends with `N passed, N failed`.
import { spawnSync } from "node:child_process";
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { ensureInstalled, top } from "./install_if_missing.mjs";

ensureInstalled();

let passed = 0;
let failed = 0;
function step(name, args) {
  const r = spawnSync(process.execPath, args, { cwd: top, stdio: "inherit" });
  const ok = r.status === 0;
  console.log(`${ok ? "ok    " : "FAILED"} ${name}`);
  if (ok) passed += 1;
  else failed += 1;
  return ok;
}

const bin = (p) => path.join(top, "node_modules", p);
const built = step("strict type check and build", ["scripts/build.mjs"]);
step("formatter", [bin("prettier/bin/prettier.cjs"), "--check", "--log-level", "warn", "src", "tests", "scripts"]);
step("linter", [
  bin("oxlint/bin/oxlint"),
  "-c",
  "scripts/oxlint.json",
  "--type-aware",
  "--quiet",
  "src",
  "tests",
  "scripts",
]);

if (built) {
  const dir = mkdtempSync(path.join(tmpdir(), "coldseam-test-"));
  const report = path.join(dir, "report.json");
  const r = spawnSync(
    process.execPath,
    [
      bin("vitest/vitest.mjs"),
      "run",
      "--config",
      "tests/vitest.config.ts",
      "--reporter=default",
      "--reporter=json",
      `--outputFile.json=${report}`,
      ...process.argv.slice(2),
    ],
    { cwd: top, stdio: "inherit", env: { ...process.env, COLDSEAM_NO_BUILD: "1" } },
  );
  try {
    const result = JSON.parse(readFileSync(report, "utf8"));
    passed += result.numPassedTests;
    failed += result.numFailedTests;
    // A suite that cannot even be loaded counts no test of its own.
    if (r.status !== 0 && result.numFailedTests === 0) failed += 1;
    if (result.numPassedTests === 0) failed += 1;
  } catch {
    console.error("the test runner left no report");
    failed += 1;
  }
  rmSync(dir, { recursive: true, force: true });
}

console.log(`${passed} passed, ${failed} failed`);
process.exit(failed === 0 ? 0 : 1);
