import { lstatSync, mkdirSync, readFileSync, readdirSync, rmSync, rmdirSync, statfsSync, writeFileSync } from "node:fs";
import path from "node:path";
import { codeDigest } from "./code_digest.js";
import { ENTRY_NAME, isOurs, PART_NAME } from "./cache_entry.js";

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

const why = (e: unknown): string => (e instanceof Error ? e.message : String(e));

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
    const wanted = expected.small + (rasters ? expected.rasters : 0);
    const disk = statfsSync(there === undefined ? path.dirname(folder) : folder);
    const short =
      wanted > limitBytes
        ? "the limit"
        : disk.bavail * disk.bsize < wanted + SPARE_BYTES
          ? "the space left on its disk"
          : null;
    const trouble = short === null ? null : `nothing is added: ${short} is too small`;
    if (there === undefined) {
      if (short !== null) return { use: null, trouble };
      mkdirSync(folder);
      writeFileSync(path.join(folder, TAG_NAME), TAG, { flag: "wx" });
    }
    return { use: { folder, code: codeDigest(), write: short === null, rasters }, trouble };
  } catch (e) {
    return { use: null, trouble: `${folder} cannot be used (${why(e)}); nothing is kept` };
  }
}

export interface CacheSize {
  readonly entries: number;
  readonly bytes: number;
}

interface Found extends CacheSize {
  readonly list: readonly { readonly name: string; readonly bytes: number; readonly usedMs: number }[];
}

function look(folder: string, now: number): Found {
  const list: { name: string; bytes: number; usedMs: number }[] = [];
  for (const name of namesIn(folder)) {
    const part = PART_NAME.test(name);
    if (!part && !ENTRY_NAME.test(name)) continue;
    const s = lstatSync(path.join(folder, name), { throwIfNoEntry: false });
    if (s === undefined || !s.isFile()) continue;
    if (part && now - s.mtimeMs < ABANDONED_MS) continue;
    list.push({ name, bytes: s.size, usedMs: part ? 0 : s.mtimeMs });
  }
  return { list, entries: list.length, bytes: list.reduce((sum, e) => sum + e.bytes, 0) };
}

/** Names in the folder; none where it is a link, no folder, or cannot be read. */
function namesIn(folder: string): string[] {
  try {
    return lstatSync(folder).isDirectory() ? readdirSync(folder) : [];
  } catch {
    return [];
  }
}

export function cacheSize(folder: string): CacheSize {
  const { entries, bytes } = look(folder, Date.now());
  return { entries, bytes };
}

/** Removes what was used longest ago until at most `limitBytes` are left. Another run that reads them meanwhile makes them again. */
export function trimCache(folder: string, limitBytes: number, now = Date.now()): void {
  const found = look(folder, now);
  let { bytes } = found;
  const oldest = [...found.list].sort((a, b) => a.usedMs - b.usedMs || (a.name < b.name ? -1 : 1));
  for (const e of oldest) {
    if (bytes <= limitBytes && e.usedMs > 0) return;
    if (removeOurs(path.join(folder, e.name))) bytes -= e.bytes;
  }
}

/** Removes every entry, and the folder where nothing else lies in it. Returns what was removed. */
export function clearCache(folder: string): CacheSize {
  let entries = 0;
  let bytes = 0;
  for (const e of look(folder, Number.MAX_VALUE).list) {
    if (!removeOurs(path.join(folder, e.name))) continue;
    entries++;
    bytes += e.bytes;
  }
  const tag = path.join(folder, TAG_NAME);
  try {
    const rest = namesIn(folder);
    if (rest.length === 1 && rest[0] === TAG_NAME && lstatSync(tag).isFile() && readFileSync(tag, "utf8") === TAG) {
      rmSync(tag);
      rmdirSync(folder);
    }
  } catch {
    // another run has just written into it
  }
  return { entries, bytes };
}

function removeOurs(file: string): boolean {
  try {
    if (!isOurs(file)) return false;
    rmSync(file);
    return true;
  } catch {
    return false; // open elsewhere, or gone already
  }
}
