import { statSync } from "node:fs";
import { setTimeout as wait } from "node:timers/promises";
import { readCooldown, sizeProblems, surveyCooldown } from "../input/index.js";
import type { Analysis } from "../model/analysis.js";
import { InputError, UsageError, type Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { settingRecord, settingsWith, type Settings } from "../settings.js";
import { canonical, contentHash, description, workHash } from "../store/identity.js";
import { openForWriting } from "../store/open.js";
import { checkName, findAnalysis, saveAnalysis, watchedAnalyses, WATCHED } from "../store/save.js";
import { cacheOption, runAnalysis, workerCount, type IngestOptions } from "./ingest.js";
import { loopPlot } from "./loop_plot.js";
import { programVersion } from "./main.js";
import { print, say } from "./say.js";
import { settle } from "./sources.js";
import { fixed, loopText, sayNotices } from "./summary.js";

interface Watch {
  readonly yaml: readonly string[];
  readonly db: string;
  readonly allowOutside: boolean;
  readonly settings: Settings;
  readonly workers: number;
  readonly signal: AbortSignal;
  readonly cache: ReturnType<typeof cacheOption>;
}

/** What the database holds of the run. */
interface Taken {
  readonly analysis: number;
  readonly frames: number;
}

/** `coldseam ingest --watch`: looks at the files of a run that goes on, and takes in what is new as soon as it is whole and has stopped
 *  changing: an analysis of all frames so far, which takes the place of the one before. Ends at `--until` or by SIGINT or SIGTERM. */
export async function watch(yaml: readonly string[], o: IngestOptions): Promise<void> {
  const stray = o.until !== undefined ? "--until" : "--every";
  if (o.watch !== true)
    throw new UsageError(`${stray} says nothing without --watch`, `add --watch, or leave ${stray} out`);
  const until = o.until === undefined ? Infinity : Number(o.until);
  if (until !== Infinity && !(Number.isInteger(until) && until > 0))
    throw new UsageError(`--until ${String(o.until)}: expected a number of frames`, "for example --until 24");
  const everyS = o.every === undefined ? 2 : Number(o.every);
  if (!(everyS >= 0.01 && everyS <= 3600))
    throw new UsageError(
      `--every ${String(o.every)}: expected seconds from 0.01 to 3600`,
      "leave it out to look every 2 s",
    );
  const abort = new AbortController();
  const onInterrupt = (): void => abort.abort();
  process.once("SIGINT", onInterrupt);
  process.once("SIGTERM", onInterrupt);
  const w: Watch = {
    yaml,
    db: o.db,
    allowOutside: o.allowOutside === true,
    settings: settingsWith(o.set),
    workers: workerCount(o.workers),
    signal: abort.signal,
    cache: cacheOption(o),
  };
  // Before hours of waiting: is there a description, may the database be written?
  for (const file of yaml) {
    if (statSync(file, { throwIfNoEntry: false })?.isFile() !== true)
      throw new InputError({ at: plainText(file), problem: "no such file", fix: "give the path of a cooldown.yaml" });
  }
  openForWriting(o.db).close();
  let taken: Taken | null = null;
  try {
    taken = await takeInUntil(w, until, everyS * 1000, (t) => (taken = t));
    say(`${countOf(taken.frames, "frame")} taken in, as many as --until says`);
  } catch (e) {
    if (!abort.signal.aborted) throw e;
    const held = taken as Taken | null;
    say(
      held === null
        ? "stopped; nothing was taken in"
        : `stopped; ${w.db} holds the ${countOf(held.frames, "frame")} taken in, as analysis ${held.analysis}`,
    );
  } finally {
    process.off("SIGINT", onInterrupt);
    process.off("SIGTERM", onInterrupt);
  }
}

async function takeInUntil(w: Watch, until: number, everyMs: number, onTaken: (t: Taken) => void): Promise<Taken> {
  /** What was taken in last, as described, and how its files stood. */
  let done = { described: "", files: "" };
  /** Files that stand as they did a look ago are whole. */
  let standing = "";
  let named: readonly string[] = [];
  let told: ReadonlySet<string> = new Set();
  /** What is still to come is said once in a run. */
  const saidToCome = new Set<string>();
  const tell = (wrong: readonly Problem[], toCome: readonly Problem[] = []): void => {
    const line = (p: Problem): string => `waiting: ${plainText(p.at)}: ${plainText(p.problem)}`;
    const lines = [...wrong, ...toCome].map(line).filter((text) => !saidToCome.has(text));
    if (lines.length > 3) lines.splice(3, Infinity, `waiting: and ${lines.length - 3} more`);
    for (const text of lines) if (!told.has(text)) say(text);
    for (const p of toCome) saidToCome.add(line(p));
    told = new Set(lines);
  };
  for (let first = true; ; first = false) {
    if (!first) await wait(everyMs, undefined, { signal: w.signal });
    if (done.files !== "" && stampsOf(named) === done.files) continue;
    try {
      const survey = await surveyCooldown(w.yaml, { allowOutside: w.allowOutside, growing: true, hashSources: false });
      named = survey.named;
      const files = stampsOf(named);
      const stands = files === standing;
      standing = files;
      const described = survey.cooldown === null ? "" : canonical(description(survey.cooldown));
      if (survey.cooldown !== null && described === done.described) {
        tell([], survey.waiting);
        if (stands) done = { described, files };
        continue;
      }
      if (survey.cooldown === null || !stands) {
        if (survey.cooldown === null && stands) tell(survey.problems, survey.waiting);
        continue;
      }
      const taken = await takeIn(w, survey.cooldown.frames.length);
      if (taken === null) continue;
      done = { described, files: "" };
      onTaken(taken);
      if (taken.frames >= until) return taken;
      say("waiting for more; Ctrl-C ends it");
    } catch (e) {
      // Half of a file is nothing wrong: it is looked at again.
      if (!(e instanceof InputError) || e instanceof Refusal) throw e;
      tell(e.problems);
    }
  }
}

/** A reason that waiting does not mend. */
class Refusal extends InputError {}

function refusing<T>(f: () => T): T {
  try {
    return f();
  } catch (e) {
    throw e instanceof InputError ? new Refusal(e.problems, e) : e;
  }
}

/** Size and time of change of every file; what is not there is part of it too. */
function stampsOf(files: readonly string[]): string {
  return files
    .map((file) => {
      const s = statSync(file, { throwIfNoEntry: false });
      return s === undefined ? "-" : `${s.size} ${s.mtimeMs} ${s.ino}`;
    })
    .join("\n");
}

/** Analyses and stores all frames so far. null where something changed under the work: to be looked at again.
 *  Throws InputError where a file cannot be read yet, Refusal where the database will not have the cooldown. */
async function takeIn(w: Watch, frames: number): Promise<Taken | null> {
  const options = { allowOutside: w.allowOutside, growing: true };
  const cooldown = await readCooldown(w.yaml, options);
  if (cooldown.frames.length !== frames) return null;
  const small = sizeProblems(cooldown.frames);
  if (small.length > 0) throw new Refusal(small);
  const settings = settingRecord(w.settings);
  const name = plainText(cooldown.cooldown);
  const db = refusing(() => openForWriting(w.db));
  try {
    const work = workHash(contentHash(description(cooldown)), settings, programVersion());
    const there = findAnalysis(db, work);
    if (there !== null) {
      print(`${name}: ${countOf(frames, "frame")}, already in ${w.db} as analysis ${there}\n`);
      return { analysis: there, frames };
    }
    refusing(() => checkName(db, cooldown, null, watchedAnalyses(db, cooldown.cooldown, settings)));
  } finally {
    db.close();
  }
  const analysis = await runAnalysis(cooldown, w);
  w.signal.throwIfAborted();
  const settled = await settle(analysis, () => readCooldown(w.yaml, options));
  if (settled === null) {
    analysis.release?.();
    say(`${name}: the files of the frames changed meanwhile; once more`);
    return null;
  }
  const message = "taken in while the run went on; the next such analysis takes its place";
  const notices = [...analysis.notices, { frame: null, code: WATCHED, message }];
  const again = refusing(() => openForWriting(w.db));
  try {
    const saved = refusing(() => saveAnalysis(again, { ...analysis, cooldown: settled, notices }, new Date()));
    print(`${name}: ${countOf(frames, "frame")} stored in ${w.db} as analysis ${saved.id}\n`);
    print(soFar(analysis));
    sayNotices(analysis.notices);
    return { analysis: saved.id, frames };
  } finally {
    again.close();
    analysis.release?.();
  }
}

/** The newest frame, and the loops as far as they have come. */
function soFar(a: Analysis): string {
  const last = a.cooldown.frames.length - 1;
  const [info, result] = [a.cooldown.frames[last], a.frames[last]];
  const { fraction } = result;
  const found =
    fraction === null
      ? info.excluded === undefined
        ? "undecided"
        : "left out"
      : `metallic fraction ${fixed(fraction.value, 3)} (${fixed(fraction.low, 3)} to ${fixed(fraction.high, 3)})`;
  const cycles = [...new Set(a.cooldown.frames.map((f) => f.cycle))];
  const plots = cycles.map((cycle) => {
    const points = a.cooldown.frames.flatMap((f) => {
      const value = a.frames[f.frame].fraction?.value;
      return f.cycle !== cycle || value === undefined
        ? []
        : [{ branch: f.branch, temperatureK: f.temperatureK, fraction: value }];
    });
    return `${cycles.length > 1 ? `  cycle ${cycle}\n` : ""}${loopPlot(points)}`;
  });
  return `  frame ${last}, ${info.branch}, ${Number(info.temperatureK.toFixed(3))} K: ${found}\n${loopText(a)}${plots.join("\n")}`;
}
