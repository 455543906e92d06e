// Generated cooldowns, kept between runs in the temporary folder: making a large one takes longer than analysing it.
import { existsSync, mkdirSync, mkdtempSync, renameSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";

/** Evenly spread temperatures through the transition, down and up again. */
function series(frames) {
  const cooling = Math.ceil(frames / 2);
  const spread = (n) => Array.from({ length: n }, (_, k) => (n === 1 ? 157 : 135 + (45 * k) / (n - 1)));
  return [
    { branch: "cooling", temperaturesK: spread(cooling).reverse() },
    { branch: "warming", temperaturesK: spread(frames - cooling) },
  ];
}

/** Path of the cooldown.yaml of a generated cooldown of so many frames of size × size pixels; its truth lies beside it. */
export async function generatedCooldown(size, frames) {
  const folder = path.join(tmpdir(), "coldseam-bench", `${size}-${frames}`);
  const yaml = path.join(folder, "cooldown.yaml");
  if (existsSync(path.join(folder, "truth/truth.json")) && existsSync(yaml)) return yaml;
  const { defaultSpec, generateStack } = await import("../../dist/demo/index.js");
  console.error(`making ${frames} frames of ${size} × ${size} …`);
  mkdirSync(path.dirname(folder), { recursive: true });
  // Made aside and put in place whole, so that a run that was stopped leaves nothing that looks finished.
  const making = mkdtempSync(`${folder}-`);
  generateStack(
    defaultSpec({ cooldown: `bench-${size}-${frames}`, rows: size, cols: size, series: series(frames), seed: 5 }),
    making,
  );
  rmSync(folder, { recursive: true, force: true });
  renameSync(making, folder);
  return yaml;
}
