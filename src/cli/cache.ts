import { cacheFolderOf, cacheSize, clearCache } from "../workers/cache_folder.js";
import { print } from "./say.js";

export interface CacheOptions {
  readonly db: string;
  readonly clear?: boolean;
}

const sizeText = (bytes: number, entries: number): string =>
  `${(bytes / 1e6).toFixed(1)} MB in ${entries} ${entries === 1 ? "file" : "files"}`;

/** `coldseam cache`: says what the cache of a database holds, or deletes it. The database itself is not touched. */
export function cache(o: CacheOptions): void {
  const folder = cacheFolderOf(o.db);
  if (o.clear === true) {
    const { bytes, entries } = clearCache(folder);
    print(`${folder}: ${sizeText(bytes, entries)} deleted\n`);
    return;
  }
  const { bytes, entries } = cacheSize(folder);
  print(
    entries === 0
      ? `${folder}: nothing is kept\n`
      : `${folder}: ${sizeText(bytes, entries)}; --clear deletes it, and the next ingest makes anew what it needs\n`,
  );
}
