import { existsSync } from "node:fs";
import { InputError } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { noDatabase } from "../store/problem.js";
import { cacheFolderOf, cacheSize, clearCache, type CacheSize } from "../workers/cache_folder.js";
import { print } from "./say.js";

export interface CacheOptions {
  readonly db: string;
  readonly clear?: boolean;
}

const sizeText = ({ bytes, entries }: CacheSize): string =>
  `${(bytes / 1e6).toFixed(1)} MB in ${countOf(entries, "file")}`;

/** `coldseam cache`: says what the cache of a database holds, or deletes it. The database itself is not touched. Throws InputError where
 *  there is neither database nor cache, and where the cache cannot be read or deleted. */
export function cache(o: CacheOptions): void {
  const folder = cacheFolderOf(o.db);
  if (!existsSync(o.db) && !existsSync(folder)) throw noDatabase(o.db);
  if (o.clear === true) clear(folder);
  else {
    const found = cacheSize(folder);
    if (found.trouble !== null)
      throw new InputError({
        at: plainText(folder),
        problem: `cannot be read, so that nobody can say what is kept there: ${found.trouble}`,
        fix: "let this user read the folder (and write to it, or no ingest keeps anything)",
      });
    print(
      found.entries === 0
        ? `${folder}: nothing is kept\n`
        : `${folder}: ${sizeText(found)}; --clear deletes it, and the next ingest makes anew what it needs\n`,
    );
  }
}

function clear(folder: string): void {
  const done = clearCache(folder);
  const { left, trouble } = done;
  const stays = done.others > 0 ? `; ${countOf(done.others, "other file")} in it left alone` : "";
  if (trouble === null && done.entries === 0) print(`${folder}: nothing is kept${stays}\n`);
  else if (done.entries > 0) print(`${folder}: ${sizeText(done)} deleted${stays}\n`);
  if (trouble !== null)
    throw new InputError({
      at: plainText(folder),
      problem:
        left.entries > 0
          ? `${sizeText(left)} could not be deleted: ${trouble}`
          : `cannot be read, and what may be kept there was not deleted: ${trouble}`,
      fix: "let this user read the folder and write to it, then run this again",
    });
}
