// Compiles src/ to dist/, and bundles the browser's side of the report.
import { spawnSync } from "node:child_process";
import { fileURLToPath } from "node:url";
import path from "node:path";
import { build } from "esbuild";

const top = path.dirname(path.dirname(fileURLToPath(import.meta.url)));

function compile(project) {
  const args = [path.join(top, "node_modules/typescript/bin/tsc"), "-p", path.join(top, project)];
  const run = spawnSync(process.execPath, args, { stdio: "inherit", cwd: top });
  if (run.status !== 0) process.exit(run.status ?? 1);
}

compile(".");
compile("src/report/page"); // only checked: esbuild writes it
await build({
  entryPoints: [path.join(top, "src/report/page/main.ts"), path.join(top, "src/report/page/page.css")],
  outdir: path.join(top, "dist/report/page"),
  bundle: true,
  minify: true,
  format: "iife",
  target: "es2022",
  charset: "utf8",
  logLevel: "warning",
});
