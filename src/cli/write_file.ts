import { closeSync, openSync, renameSync, rmSync, writeSync } from "node:fs";
import { InputError } from "../model/errors.js";

/** Writes a file piece by piece, beside its place, and renames it: no half of a file is left behind. Returns its size in bytes. */
export function writeFile(file: string, parts: Iterable<string | Uint8Array>): number {
  const beside = `${file}.part`;
  let size = 0;
  try {
    const fd = openSync(beside, "w");
    try {
      for (const part of parts) {
        const bytes = typeof part === "string" ? Buffer.from(part, "utf8") : part;
        for (let at = 0; at < bytes.length;) at += writeSync(fd, bytes, at);
        size += bytes.length;
      }
    } finally {
      closeSync(fd);
    }
    renameSync(beside, file);
    return size;
  } catch (e) {
    rmSync(beside, { force: true });
    throw new InputError(
      {
        at: file,
        problem: `cannot be written: ${e instanceof Error ? e.message : String(e)}`,
        fix: "name a file in a folder that exists and may be written",
      },
      e,
    );
  }
}
