import { closeSync, openSync, renameSync, rmSync, writeSync } from "node:fs";
import path from "node:path";
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
        problem: `cannot be written: ${why(e, file)}`,
        fix:
          codeOf(e) === "ENOSPC" || codeOf(e) === "EDQUOT"
            ? "free some space, or name a file on another disk; then run again"
            : "name a file in a folder that exists and may be written",
      },
      e,
    );
  }
}

const codeOf = (e: unknown): string => (e instanceof Error && "code" in e ? String(e.code) : "");

/** The system's error in words, without the name of the file that was written beside the one asked for. */
function why(e: unknown, file: string): string {
  const code = codeOf(e);
  const folder = path.dirname(path.resolve(file));
  if (code === "ENOENT" || code === "ENOTDIR") return `the folder ${folder} does not exist`;
  if (code === "EISDIR") return "it is a folder";
  if (code === "EACCES" || code === "EPERM") return `the folder ${folder} may not be written by this user`;
  if (code === "EROFS") return `the folder ${folder} is on a disk that may not be written`;
  if (code === "EDQUOT") return "no space left of what this user may take on its disk";
  if (code === "ENOSPC") return "no space left on its disk";
  if (code === "ENAMETOOLONG") return "its name is too long";
  return e instanceof Error ? e.message : String(e);
}
