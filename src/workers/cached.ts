import { deserialize, serialize } from "node:v8";
import { readEntry, writeEntry } from "./cache_entry.js";
import type { CacheUse } from "./cache_folder.js";
import { notKept } from "./cache_words.js";
import { contentKey } from "./content_key.js";
import { fetchBytes, keepBytes } from "./scratch.js";

/** The first reason why this thread could not keep something; it keeps nothing more in that folder. */
const troubles = new Map<string, string>();

/** Why this thread could not keep something of a run; null where it could, or has said so. */
export function takeTrouble(run: { readonly cache: CacheUse | null }): string | null {
  const folder = run.cache?.folder;
  const t = folder === undefined ? undefined : troubles.get(folder);
  if (folder === undefined || t === undefined || t === "") return null;
  troubles.set(folder, "");
  return t;
}

/** A run that begins may try again. */
export function forgetTroubles(): void {
  troubles.clear();
}

const entryName = (stage: string, key: string): string => `${stage}-${key}`;

/** @param from everything that the result depends on, besides the code: plain values */
export const keyOf = (cache: CacheUse | null, stage: string, from: unknown): string =>
  contentKey([cache?.code ?? null, stage, from]);

/** What a stage has made before of the same input, or null. */
export function kept<T>(cache: CacheUse | null, stage: string, key: string): T | null {
  if (cache === null) return null;
  const bytes = readEntry(cache.folder, entryName(stage, key));
  if (bytes === null) return null;
  try {
    return deserialize(bytes) as T;
  } catch {
    return null;
  }
}

export function keepInCache(cache: CacheUse | null, stage: string, key: string, value: unknown): void {
  if (cache !== null) keepContent(cache, stage, key, () => serialize(value));
}

function keepContent(cache: CacheUse, stage: string, key: string, content: () => Uint8Array): void {
  if (!cache.write || troubles.has(cache.folder)) return;
  try {
    writeEntry(cache.folder, entryName(stage, key), content());
  } catch (e) {
    // A cache that cannot be written is no reason to stop: the work goes on without it.
    troubles.set(cache.folder, notKept("nothing more", cache.folder, e));
  }
}

/** A stage's result, from the cache or made now.
 *  @param from everything that the result depends on, besides the code: plain values */
export async function cached<T extends object>(
  cache: CacheUse | null,
  stage: string,
  from: unknown,
  make: () => T | Promise<T>,
): Promise<T> {
  if (cache === null) return make();
  const key = keyOf(cache, stage, from);
  const before = kept<T>(cache, stage, key);
  if (before !== null) return before;
  const made = await make();
  keepInCache(cache, stage, key, made);
  return made;
}

/** Keeps what lies in the scratch folder under `name`, as it is. */
export function keepScratchInCache(
  cache: CacheUse | null,
  stage: string,
  key: string,
  dir: string,
  name: string,
): void {
  if (cache?.write === true) keepContent(cache, stage, key, () => fetchBytes(dir, name));
}

/** Brings it back into the scratch folder; false where it has to be made. */
export function scratchFromCache(
  cache: CacheUse | null,
  stage: string,
  key: string,
  dir: string,
  name: string,
): boolean {
  const bytes = cache === null ? null : readEntry(cache.folder, entryName(stage, key));
  if (bytes === null) return false;
  keepBytes(dir, name, bytes);
  return true;
}
