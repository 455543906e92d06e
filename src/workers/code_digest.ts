import { createHash } from "node:crypto";
import { readFileSync, readdirSync } from "node:fs";
import path from "node:path";
import { fileURLToPath } from "node:url";

/** What the results of a stage are made by, besides its input: these rooms of the program, and the versions of its libraries. */
const ROOMS = ["model", "numerics", "raster", "input", "stages", "workers", "settings"];

let found: string | null = null;

/** SHA-256 of the program's own code as far as it computes, of its libraries' versions, and of the engine that runs it (whose
 *  transcendental functions may round another way): a result made by other code is never taken for this one's. */
export function codeDigest(): string {
  return (found ??= digest());
}

function digest(): string {
  const top = path.dirname(path.dirname(fileURLToPath(import.meta.url)));
  const hash = createHash("sha256");
  hash.update(`${process.version} ${process.arch} ${process.platform}\n`);
  hash.update(readFileSync(path.join(path.dirname(top), "package.json")));
  const files = readdirSync(top, { recursive: true, encoding: "utf8" })
    .map((f) => f.split(path.sep).join("/"))
    .filter((f) => /\.[jt]s$/.test(f) && ROOMS.includes(/^[^/.]+/.exec(f)?.[0] ?? ""))
    .sort();
  for (const f of files) hash.update(`${f}\n`).update(readFileSync(path.join(top, f)));
  return hash.digest("hex");
}
