import { existsSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import { InputError } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { draftCooldown } from "../input/index.js";
import { command } from "./called.js";
import { print } from "./say.js";

/** `coldseam draft`: writes cooldown.yaml and its tables into the folder; never over a file that is there. */
export async function draft(folder: string): Promise<void> {
  const d = await draftCooldown(folder);
  const paths = d.files.map((f) => join(folder, f.name));
  const there = paths.filter((p) => existsSync(p));
  if (there.length > 0) {
    throw new InputError(
      there.map((p) => ({
        at: plainText(p),
        problem: "is there already, and is not written over",
        fix: `move it away, or go on with it: ${command("check", paths[0] ?? p)}`,
      })),
    );
  }
  d.files.forEach((f, k) => {
    const path = paths[k] ?? f.name;
    try {
      writeFileSync(path, f.text, { flag: "wx" });
    } catch (e) {
      const problem = `cannot be written: ${e instanceof Error ? e.message : String(e)}`;
      throw new InputError({ at: plainText(path), problem, fix: "make the folder writable" }, e);
    }
    print(`wrote ${plainText(path)}\n`);
  });
  const yaml = plainText(paths[0] ?? "cooldown.yaml");
  print(`${countOf(d.frames, "frame")} in ${countOf(d.series, "series", "series")}\n`);
  if (d.unplaced > 0)
    print(`not placed: ${countOf(d.unplaced, "file")}, listed with the reason at the end of ${yaml}\n`);
  if (d.toFill > 0) print(`to fill in: ${countOf(d.toFill, "place")} marked FILL in ${yaml}\n`);
  print(`next: ${d.toFill > 0 ? `edit ${yaml}, then ` : ""}${command("check", paths[0] ?? "")}\n`);
}
