import {
  accessSync,
  constants,
  lstatSync,
  mkdirSync,
  readFileSync,
  readdirSync,
  rmSync,
  rmdirSync,
  statfsSync,
  writeFileSync,
} from "node:fs";
import path from "node:path";
import { codeDigest } from "./code_digest.js";
import { ENTRY_NAME, isOurs, PART_NAME } from "./cache_entry.js";
import { notKept, reasonOf } from "./cache_words.js";

/** How a run uses a cache folder. Plain data: it travels to the threads. */
export interface CacheUse {
  readonly folder: string;
  /** `codeDigest` of the program: part of every key. */
  readonly code: string;
  /** False: what is there is used, nothing is added. */
  readonly write: boolean;
  /** False: full-size rasters are made again rather than kept, as they would not all fit. */
  readonly rasters: boolean;
}

/** What backup programs know a cache by: the Cache Directory Tagging Specification (bford.info/cachedir). */
const TAG_NAME = "CACHEDIR.TAG";
const TAG =
  "Signature: 8a477f597d28d172789f06886806bc55\n# What coldseam keeps of the early stages of an analysis. It may be deleted at any time.\n";

/** What is written is left this much of the disk, bytes. */
const SPARE_BYTES = 256 * 2 ** 20;
/** Half-written entries older than this are nobody's any more. */
const ABANDONED_MS = 24 * 3600 * 1000;

/** The cache of a database: a folder beside it. */
export const cacheFolderOf = (dbFile: string): string => `${dbFile}.cache`;

export interface OpenedCache {
  /** null: no cache can be used. */
  readonly use: CacheUse | null;
  /** Why nothing is kept, or not all; null where all is well. */
  readonly trouble: string | null;
}

/** Whole megabytes that are enough for so many bytes. */
const megabytes = (bytes: number): string => `${Math.ceil(bytes / 1e6)} MB`;

/** Makes the folder where there is none and something may be kept, and decides what may be kept. Never throws: a cache that cannot be used is done without.
 *  @param limitBytes what the whole folder may hold
 *  @param expected   what this run would keep: of full-size rasters and of all else, bytes */
export function openCache(
  folder: string,
  limitBytes: number,
  expected: { readonly rasters: number; readonly small: number },
): OpenedCache {
  try {
    const there = lstatSync(folder, { throwIfNoEntry: false });
    if (there !== undefined && !there.isDirectory())
      return { use: null, trouble: `${folder} is no folder; it is left alone, and nothing is kept` };
    const rasters = expected.rasters + expected.small <= limitBytes;
    if (there !== undefined) {
      try {
        accessSync(folder, constants.R_OK | constants.W_OK | constants.X_OK);
      } catch (e) {
        // What can still be read is used.
        return {
          use: { folder, code: codeDigest(), write: false, rasters },
          trouble: notKept("nothing", folder, e),
        };
      }
    }
    const wanted = expected.small + (rasters ? expected.rasters : 0);
    const disk = statfsSync(there === undefined ? path.dirname(folder) : folder);
    const needs = `this cooldown needs about ${megabytes(expected.small)}, ${megabytes(expected.small + expected.rasters)} with its full-size rasters`;
    const short =
      wanted > limitBytes
        ? `the limit is too small: ${needs}, and --cache-mb allows ${limitBytes / 1e6}`
        : disk.bavail * disk.bsize < wanted + SPARE_BYTES
          ? `the space left on its disk is too small: ${needs}, and ${megabytes(SPARE_BYTES)} stay free`
          : null;
    const trouble = short === null ? null : `nothing is added, as ${short}`;
    if (there === undefined) {
      if (short !== null) return { use: null, trouble };
      mkdirSync(folder);
      writeFileSync(path.join(folder, TAG_NAME), TAG, { flag: "wx" });
    }
    return { use: { folder, code: codeDigest(), write: short === null, rasters }, trouble };
  } catch (e) {
    return { use: null, trouble: notKept("nothing", folder, e) };
  }
}

export interface CacheSize {
  readonly entries: number;
  readonly bytes: number;
}

/** What a cache holds, as far as it could be looked into. */
export interface CacheLook extends CacheSize {
  /** Why it could not be read, or not all of it; null where it could. */
  readonly trouble: string | null;
}

/** What was removed of a cache. */
export interface Cleared extends CacheSize {
  /** What is ours and could not be removed. */
  readonly left: CacheSize;
  /** Why the folder could not be read, or something not be removed; null where all went well. */
  readonly trouble: string | null;
  /** Files of others, which stay. */
  readonly others: number;
}

interface Entry {
  readonly name: string;
  readonly bytes: number;
  readonly usedMs: number;
}

const sizeOf = (list: readonly Entry[]): CacheSize => ({
  entries: list.length,
  bytes: list.reduce((sum, e) => sum + e.bytes, 0),
});

/** Everything that may be removed, and nothing else: what is counted and what is deleted is one list. */
function look(folder: string, now: number): { readonly list: readonly Entry[]; readonly error: unknown } {
  const list: Entry[] = [];
  let error: unknown = null;
  try {
    const tagged = isTagged(folder);
    for (const name of namesIn(folder)) {
      const part = PART_NAME.test(name);
      if (!part && !ENTRY_NAME.test(name)) continue;
      try {
        const s = lstatSync(path.join(folder, name), { throwIfNoEntry: false });
        if (s === undefined || !s.isFile()) continue;
        if (part && now - s.mtimeMs < ABANDONED_MS) continue;
        if (mayRemove(path.join(folder, name), tagged))
          list.push({ name, bytes: s.size, usedMs: part ? 0 : s.mtimeMs });
      } catch (e) {
        error ??= e;
      }
    }
  } catch (e) {
    error = e;
  }
  return { list, error };
}

/** Names in the folder; none where there is none, or a link or a file in its place. Throws what the file system says where it cannot be read. */
function namesIn(folder: string): string[] {
  const there = lstatSync(folder, { throwIfNoEntry: false });
  return there?.isDirectory() === true ? readdirSync(folder) : [];
}

/** Whether our own tag lies in the folder: whole, or empty as a power cut leaves it. */
function isTagged(folder: string): boolean {
  const tag = path.join(folder, TAG_NAME);
  try {
    if (!lstatSync(tag).isFile()) return false;
    const text = readFileSync(tag, "utf8");
    return text === TAG || text === "";
  } catch {
    return false;
  }
}

/**
 * Whether a file whose name is that of an entry may be removed. Its name holds a digest of 64 digits (16 and a process number while it is
 * written), which nobody gives to a file by hand; in a folder with our own tag that is enough, for a power cut or a bad disk
 * may have taken whatever the file began with. In a folder without the tag it must also begin as ours do, or hold nothing that could be
 * lost. Links, pipes and folders are never ours.
 */
function mayRemove(file: string, tagged: boolean): boolean {
  const s = lstatSync(file, { throwIfNoEntry: false });
  return s?.isFile() === true && (tagged || s.size === 0 || isOurs(file));
}

export function cacheSize(folder: string): CacheLook {
  const { list, error } = look(folder, Date.now());
  return { ...sizeOf(list), trouble: error === null ? null : reasonOf(error) };
}

/** Removes what was used longest ago until at most `limitBytes` are left. Another run that reads them meanwhile makes them again. */
export function trimCache(folder: string, limitBytes: number, now = Date.now()): void {
  const { list } = look(folder, now);
  let { bytes } = sizeOf(list);
  const tagged = isTagged(folder);
  const oldest = [...list].sort((a, b) => a.usedMs - b.usedMs || (a.name < b.name ? -1 : 1));
  for (const e of oldest) {
    if (bytes <= limitBytes && e.usedMs > 0) return;
    if (remove(path.join(folder, e.name), tagged) === null) bytes -= e.bytes;
  }
}

/** Removes every entry, and the folder where nothing else lies in it. Never throws. */
export function clearCache(folder: string): Cleared {
  const found = look(folder, Number.MAX_VALUE);
  const tagged = isTagged(folder);
  const [gone, left]: [Entry[], Entry[]] = [[], []];
  let { error } = found;
  for (const e of found.list) {
    const refused = remove(path.join(folder, e.name), tagged);
    (refused === null ? gone : left).push(e);
    error ??= refused;
  }
  let others = 0;
  try {
    const rest = namesIn(folder);
    others = rest.filter((name) => name !== TAG_NAME).length - left.length;
    if (rest.length === 1 && isTagged(folder)) {
      rmSync(path.join(folder, TAG_NAME));
      rmdirSync(folder);
    }
  } catch {
    // another run has just written into it, or it may not be changed: an empty folder does no harm
  }
  return { ...sizeOf(gone), left: sizeOf(left), trouble: error === null ? null : reasonOf(error), others };
}

/** null where it is gone, else what the file system says. */
function remove(file: string, tagged: boolean): unknown {
  try {
    if (mayRemove(file, tagged)) rmSync(file, { force: true });
    return null;
  } catch (e) {
    return e;
  }
}
