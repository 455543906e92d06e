import type { ErrorRecord } from "../model/errors.js";
import { clean } from "./clean_task.js";
import { debris, debrisMap } from "./debris_tasks.js";
import { levels, measure } from "./measure_task.js";
import { pairs } from "./pairs_task.js";

export type Reply<T> =
  | {
      readonly ok: true;
      readonly value: T;
      /** Why something could not be kept in the cache, said once a thread. */
      readonly trouble?: string | null;
    }
  | { readonly ok: false; readonly error: ErrorRecord };

const all = { clean, pairs, debris, debrisMap, levels, measure };
export type TaskName = keyof typeof all;
export type TaskInput<N extends TaskName> = Parameters<(typeof all)[N]>[0];
export type TaskOutput<N extends TaskName> = Awaited<ReturnType<(typeof all)[N]>>;
/** The tasks by name, typed so that a name keeps its input and its output together. Each is given the settings that it uses and no
 *  others: what is kept of it is known again by its input. */
export const tasks: { readonly [N in TaskName]: (input: TaskInput<N>) => TaskOutput<N> | Promise<TaskOutput<N>> } = all;
