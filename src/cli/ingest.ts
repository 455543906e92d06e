import { existsSync } from "node:fs";
import os from "node:os";
import { InputError, UsageError } from "../model/errors.js";
import type { Analysis } from "../model/analysis.js";
import type { Cooldown } from "../model/cooldown.js";
import { countOf, plainText } from "../model/text.js";
import { readCooldown, sizeProblems } from "../input/index.js";
import { settingRecord, settingsWith, type Settings } from "../settings.js";
import { openForWriting, type Db } from "../store/open.js";
import { isDiskFull } from "../store/problem.js";
import { cacheFolderOf, cacheSize, clearCache } from "../workers/cache_folder.js";
import { removeUnfilled } from "../store/unfilled.js";
import { contentHash, description, workHash } from "../store/identity.js";
import { findAnalysis, saveAnalysis } from "../store/save.js";
import { command } from "./called.js";
import { refuseChangedSources, refuseOtherContent } from "./sources.js";
import { loopText, sayNotices } from "./summary.js";
import { programVersion } from "./main.js";
import { makeProgress } from "./progress.js";
import { print, say } from "./say.js";

export interface IngestOptions {
  readonly db: string;
  readonly workers?: string;
  readonly set?: readonly string[];
  readonly allowOutside?: boolean;
  readonly watch?: boolean;
  readonly until?: string;
  readonly every?: string;
  /** False with `--no-cache`. */
  readonly cache?: boolean;
  readonly cacheMb?: string;
}

/** NaN also where nothing is written: `Number("")` is 0. */
const numberIn = (text: string): number => (text.trim() === "" ? Number.NaN : Number(text));

export function workerCount(text: string | undefined): number {
  if (text === undefined) return Math.max(1, os.availableParallelism());
  const n = numberIn(text);
  if (!Number.isInteger(n) || n < 0 || n > 256)
    throw new UsageError(
      `--workers ${text.trim() === "" ? '""' : text}: expected a whole number from 0 to 256`,
      "leave it out to use every core",
    );
  return n;
}

/** How much the cache of a database may hold where nobody says, MB. */
const CACHE_MB = 2000;

/** The cache that the command line asks for; undefined: none. */
export function cacheOption(o: IngestOptions): { folder: string; limitBytes: number } | undefined {
  if (o.cache === false) return undefined;
  const mb = o.cacheMb === undefined ? CACHE_MB : numberIn(o.cacheMb);
  if (!(mb >= 0 && mb <= 1e9))
    throw new UsageError(
      `--cache-mb ${o.cacheMb?.trim() === "" ? '""' : String(o.cacheMb)}: expected a number of megabytes`,
      `leave it out for ${CACHE_MB}, or use --no-cache`,
    );
  return { folder: cacheFolderOf(o.db), limitBytes: mb * 1e6 };
}

/** Analyses a cooldown with a progress bar on standard error. Throws what `analyse` throws, an AbortError where it was stopped. */
export async function runAnalysis(
  cooldown: Cooldown,
  o: {
    readonly settings: Settings;
    readonly workers: number;
    readonly signal: AbortSignal;
    readonly cache: ReturnType<typeof cacheOption>;
    /** Called where the cache could not be used as it should, after that was said. */
    readonly onCacheTrouble?: () => void;
  },
): Promise<Analysis> {
  // Loaded only now: a repeated ingest needs none of the numerics.
  const { analyse } = await import("../analyse.js");
  const progress = makeProgress(plainText(cooldown.cooldown), cooldown.frames.length);
  try {
    return await analyse(cooldown, {
      ...o,
      programVersion: programVersion(),
      onProgress: (stage, done, total) => progress.update(stage, done, total),
      onCacheTrouble: (trouble) => {
        say(`note: cache: ${plainText(trouble)}`);
        o.onCacheTrouble?.();
      },
    });
  } finally {
    progress.stop();
  }
}

/** Saves an analysis; where the disk is full, once more without the cache. */
function saveWithRoom(db: Db, analysis: Analysis, cacheFolder: string | undefined): ReturnType<typeof saveAnalysis> {
  const madeAt = new Date();
  try {
    return saveAnalysis(db, analysis, madeAt);
  } catch (e) {
    if (cacheFolder === undefined || !isDiskFull(e) || clearCache(cacheFolder).bytes === 0) throw e;
    say("note: cache: deleted, as its disk was full");
    return saveAnalysis(db, analysis, madeAt);
  }
}

/** `coldseam ingest`, of the files that describe one cooldown: read, analyse, store in one transaction, and say what was found. Returns the
 *  number of the analysis. */
export async function ingest(yaml: string | readonly string[], o: IngestOptions): Promise<number> {
  const workers = workerCount(o.workers);
  const settings = settingsWith(o.set);
  const cache = cacheOption(o);
  // Before the database is made: a description that cannot be used leaves nothing behind.
  const cooldown = await readCooldown(yaml, { allowOutside: o.allowOutside === true });
  const small = sizeProblems(cooldown.frames);
  if (small.length > 0) throw new InputError(small);
  const isNew = !existsSync(o.db);
  const db = openForWriting(o.db);
  const abort = new AbortController();
  const onInterrupt = (): void => abort.abort();
  process.once("SIGINT", onInterrupt);
  process.once("SIGTERM", onInterrupt);
  try {
    const version = programVersion();
    const there = findAnalysis(db, workHash(contentHash(description(cooldown)), settingRecord(settings), version));
    if (there !== null) {
      print(
        `${plainText(cooldown.cooldown)}: already in ${o.db} as analysis ${there}, from the same files and settings; nothing to do\n`,
      );
      return there;
    }
    const known = await refuseOtherContent(db, cooldown);
    if (known !== null && known < cooldown.frames.length)
      say(
        `${plainText(cooldown.cooldown)}: ${countOf(known, "frame")} known, ${cooldown.frames.length - known} new; the whole is analysed`,
      );
    let kept = cache !== undefined;
    const onCacheTrouble = (): void => void (kept = false);
    const analysis = await runAnalysis(cooldown, { settings, workers, signal: abort.signal, cache, onCacheTrouble });
    abort.signal.throwIfAborted();
    await refuseChangedSources(cooldown);
    const saved = saveWithRoom(db, analysis, cache?.folder);
    analysis.release?.();
    print(
      `${plainText(cooldown.cooldown)}: ${countOf(analysis.frames.length, "frame")} stored in ${o.db} as analysis ${saved.id}\n`,
    );
    print(loopText(analysis));
    sayNotices(analysis.notices);
    const held = cache === undefined || !kept ? 0 : cacheSize(cache.folder).bytes;
    if (held > 0)
      say(
        `cache: ${(held / 1e6).toFixed(0)} MB beside the database speed up the next ingest; they may be deleted at any time`,
      );
    const next = [["loops"], ["walls"], ["export", "temperature"]].map((words) => command(...words, "--db", o.db));
    say(`next: ${next.join("    ")}`);
    return saved.id;
  } finally {
    process.off("SIGINT", onInterrupt);
    process.off("SIGTERM", onInterrupt);
    db.close();
    // Failed or stopped: no empty file is left to wonder about.
    if (isNew) removeUnfilled(o.db);
    if (isNew && !existsSync(o.db)) clearCache(cacheFolderOf(o.db));
  }
}
