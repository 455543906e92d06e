import { setMaxListeners } from "node:events";
import { fileURLToPath } from "node:url";
import path from "node:path";
import { Piscina } from "piscina";
import { fromErrorRecord } from "../model/errors.js";
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

/** @param workers number of threads; 0 runs everything in the calling thread, with the same results to the bit
 *  @param signal aborts the run: pending tasks reject with the signal's reason */
export function makeRunner(workers: number, signal?: AbortSignal): Runner {
  if (workers === 0) {
    return {
      async map<N extends TaskName>(name: N, inputs: readonly TaskInput<N>[], onDone?: () => void) {
        const out: TaskOutput<N>[] = [];
        for (const input of inputs) {
          signal?.throwIfAborted();
          out.push(await tasks[name](input));
          onDone?.();
        }
        return out;
      },
      close: () => Promise.resolve(),
    };
  }
  // One listener a waiting task; that many are no leak.
  if (signal !== undefined) setMaxListeners(0, signal);
  const pool = new Piscina({
    filename: workerFile(),
    minThreads: workers,
    maxThreads: workers,
    idleTimeout: 60_000,
    maxQueue: Infinity,
  });
  return {
    async map<N extends TaskName>(name: N, inputs: readonly TaskInput<N>[], onDone?: () => void) {
      return Promise.all(
        inputs.map(async (input) => {
          const reply = (await pool.run({ name, input }, signal ? { signal } : {})) as Reply<TaskOutput<N>>;
          if (!reply.ok) throw fromErrorRecord(reply.error);
          onDone?.();
          return reply.value;
        }),
      );
    },
    close: () => pool.destroy(),
  };
}
