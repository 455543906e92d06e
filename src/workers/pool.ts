import { setMaxListeners } from "node:events";
import { availableParallelism } from "node:os";
import { fileURLToPath } from "node:url";
import path from "node:path";
import { setFlagsFromString } from "node:v8";
import { Piscina } from "piscina";
import { fromErrorRecord, InputError } from "../model/errors.js";
import { takeTrouble } from "./cached.js";
import { tasks, type Reply, type TaskInput, type TaskName, type TaskOutput } from "./tasks.js";

/** Runs named tasks, in threads or in line; results come back in the order of the inputs whatever the number of workers. */
export interface Runner {
  map<N extends TaskName>(name: N, inputs: readonly TaskInput<N>[], onDone?: () => void): Promise<TaskOutput<N>[]>;
  close(): Promise<void>;
}

function workerFile(): string {
  const here = fileURLToPath(import.meta.url);
  // Worker threads run JavaScript only; under the test runner this module is TypeScript and the build lies in dist/.
  return here.endsWith(".ts")
    ? path.join(path.dirname(here), "../../dist/workers/worker.js")
    : path.join(path.dirname(here), "worker.js");
}

const DOING: Readonly<Record<TaskName, string>> = {
  clean: "cleaning",
  pairs: "placing",
  debris: "looking for debris in",
  debrisMap: "mapping debris in",
  levels: "finding the levels of",
  measure: "measuring",
};

const numberOf = (source: unknown): string => String((source as { info: { frame: number } }).info.frame);

/** `frame 3`, or the whole cooldown: what a task is about. */
function aboutOf(input: object): string {
  if ("frame" in input) return `frame ${String(input.frame)}`;
  if ("info" in input) return `frame ${numberOf(input)}`;
  if ("frames" in input && Array.isArray(input.frames))
    return `frames ${numberOf(input.frames[0])} to ${numberOf(input.frames.at(-1))}`;
  return "all frames";
}

/** An error with the frame that it came from in front. Bad input names its file already. */
function named(e: unknown, name: TaskName, input: object): unknown {
  if (e instanceof InputError || !(e instanceof Error)) return e;
  const out = new Error(`${DOING[name]} ${aboutOf(input)}: ${e.message}`, { cause: e });
  if (e.stack !== undefined) out.stack = e.stack;
  return out;
}

/** A thread that ended under its task: out of memory, or killed from inside a library. */
function lost(e: unknown, name: TaskName, input: object): InputError {
  const why = e instanceof Error ? e.message : String(e);
  return new InputError(
    {
      at: aboutOf(input),
      problem: `its worker thread ended while ${DOING[name]} it (${why})`,
      fix: "if memory ran out, use fewer threads with --workers; otherwise please report it with the frame's files",
    },
    e,
  );
}

export interface RunnerOptions {
  /** Aborts the run: pending tasks reject with the signal's reason. */
  readonly signal?: AbortSignal | undefined;
  /** Module that the threads run; it answers as `worker.ts` does. */
  readonly file?: string;
  /** Told why something could not be kept in the cache, by each thread once at most. */
  readonly onTrouble?: (trouble: string) => void;
}

/** @param workers number of threads; 0 runs everything in the calling thread, with the same results to the bit
 *  The tasks reject with InputError where a file or the end of a thread stopped them; any other error names its frame. */
export function makeRunner(workers: number, options: RunnerOptions = {}): Runner {
  const { signal, file = workerFile(), onTrouble } = options;
  if (workers === 0) {
    return {
      async map<N extends TaskName>(name: N, inputs: readonly TaskInput<N>[], onDone?: () => void) {
        const out: TaskOutput<N>[] = [];
        for (const input of inputs) {
          signal?.throwIfAborted();
          try {
            out.push(await tasks[name](input));
            const trouble = takeTrouble(input);
            if (trouble !== null) onTrouble?.(trouble);
          } catch (e) {
            throw named(e, name, input);
          }
          onDone?.();
        }
        return out;
      },
      close: () => Promise.resolve(),
    };
  }
  // Where every core has a thread, the compiler's own threads only take time from them, and code waits longer to be optimised.
  if (workers >= availableParallelism()) setFlagsFromString("--no-concurrent-recompilation");
  // One listener a waiting task; that many are no leak.
  if (signal !== undefined) setMaxListeners(0, signal);
  const pool = new Piscina({
    filename: file,
    minThreads: workers,
    maxThreads: workers,
    idleTimeout: 60_000,
    maxQueue: Infinity,
  });
  // A thread that ends while idle is replaced; one that ends under a task rejects that task.
  pool.on("error", () => undefined);
  return {
    async map<N extends TaskName>(name: N, inputs: readonly TaskInput<N>[], onDone?: () => void) {
      return Promise.all(
        inputs.map(async (input) => {
          let reply: Reply<TaskOutput<N>>;
          try {
            reply = (await pool.run({ name, input }, signal ? { signal } : {})) as Reply<TaskOutput<N>>;
          } catch (e) {
            throw signal?.aborted === true ? e : lost(e, name, input);
          }
          if (!reply.ok) throw named(fromErrorRecord(reply.error), name, input);
          if (reply.trouble != null) onTrouble?.(reply.trouble);
          onDone?.();
          return reply.value;
        }),
      );
    },
    close: () => pool.destroy(),
  };
}
