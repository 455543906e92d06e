import { createHash, randomBytes } from "node:crypto";
import {
  closeSync,
  constants,
  fstatSync,
  futimesSync,
  lstatSync,
  openSync,
  readSync,
  renameSync,
  rmSync,
  writevSync,
} from "node:fs";
import path from "node:path";

/* One file of the cache: a line that says whose it is, the SHA-256 of what follows, and that. Anything else that lies in the folder
   (other names, links, pipes, folders, files that begin otherwise) is not ours: it is neither read nor written nor removed. */

export const MAGIC = Buffer.from("coldseam cache 1\n", "latin1");
const HEAD = MAGIC.length + 32;
/** More than any stage of any frame keeps: a longer file is no entry. */
const MOST_BYTES = 2 ** 31;

/** Names of entries, and of those being written. */
export const ENTRY_NAME = /^[a-z]+-[0-9a-f]{64}$/;
export const PART_NAME = /^part-\d+-[0-9a-f]{16}$/;

const NOFOLLOW = constants.O_NOFOLLOW ?? 0;
// A pipe would keep its opener waiting for the other end.
const NONBLOCK = constants.O_NONBLOCK ?? 0;

/** Opens a plain file of ours for reading and hands it to `work`; null where it is none, or cannot be read. */
function withFile<T>(file: string, work: (fd: number, bytes: number) => T | null): T | null {
  let fd: number;
  try {
    fd = openSync(file, constants.O_RDONLY | NOFOLLOW | NONBLOCK);
  } catch {
    return null;
  }
  try {
    const s = fstatSync(fd);
    return s.isFile() && s.size >= HEAD && s.size <= MOST_BYTES ? work(fd, s.size) : null;
  } catch {
    return null;
  } finally {
    closeSync(fd);
  }
}

function readAll(fd: number, bytes: number): Buffer | null {
  const all = Buffer.allocUnsafeSlow(bytes);
  let at = 0;
  while (at < bytes) {
    const n = readSync(fd, all, at, bytes - at, at);
    if (n === 0) return null;
    at += n;
  }
  return all;
}

/** What an entry keeps; null where there is none, or it is not whole. Its time becomes now: what was used last goes last. */
export function readEntry(folder: string, name: string): Buffer | null {
  return withFile(path.join(folder, name), (fd, bytes) => {
    const all = readAll(fd, bytes);
    if (all === null || !all.subarray(0, MAGIC.length).equals(MAGIC)) return null;
    const content = all.subarray(HEAD);
    if (!createHash("sha256").update(content).digest().equals(all.subarray(MAGIC.length, HEAD))) return null;
    try {
      const now = new Date();
      futimesSync(fd, now, now);
    } catch {
      // somebody else's file, or a disk that may not be written: it can still be read
    }
    // Of its own memory, and so at an address that suits every typed array within.
    return Buffer.from(content.buffer.slice(content.byteOffset, content.byteOffset + content.length));
  });
}

/** Whether a file is a whole or half-written entry of ours, whatever it holds. */
export function isOurs(file: string): boolean {
  try {
    if (!lstatSync(file).isFile()) return false;
  } catch {
    return false;
  }
  const head = Buffer.alloc(MAGIC.length);
  let fd: number;
  try {
    fd = openSync(file, constants.O_RDONLY | NOFOLLOW | NONBLOCK);
  } catch {
    return false;
  }
  try {
    const n = readSync(fd, head, 0, head.length, 0);
    // A run that was killed, or a full disk, leaves a beginning of it.
    return (
      head.subarray(0, n).equals(MAGIC.subarray(0, n)) && (n === MAGIC.length || PART_NAME.test(path.basename(file)))
    );
  } catch {
    return false;
  } finally {
    closeSync(fd);
  }
}

/** Keeps `content` under a name: written aside and put in place whole, so that nobody ever reads half of it. Throws what the file
 *  system says where it cannot. */
export function writeEntry(folder: string, name: string, content: Uint8Array): void {
  const file = path.join(folder, name);
  const there = lstatSync(file, { throwIfNoEntry: false });
  if (there !== undefined && !there.isFile()) return;
  const part = path.join(folder, `part-${process.pid}-${randomBytes(8).toString("hex")}`);
  const fd = openSync(part, "wx", 0o666);
  try {
    try {
      writeAll(fd, [MAGIC, createHash("sha256").update(content).digest(), content]);
    } finally {
      closeSync(fd);
    }
    renameSync(part, file);
  } catch (e) {
    rmSync(part, { force: true });
    throw e;
  }
}

function writeAll(fd: number, parts: readonly Uint8Array[]): void {
  let left = parts.filter((p) => p.byteLength > 0);
  while (left.length > 0) {
    let n = writevSync(fd, left);
    left = left.flatMap((p) => {
      const done = Math.min(n, p.byteLength);
      n -= done;
      return done < p.byteLength ? [p.subarray(done)] : [];
    });
  }
}
