import { toErrorRecord } from "../model/errors.js";
import { takeTrouble } from "./cached.js";
import { tasks, type TaskName, type Reply } from "./tasks.js";

/** Entry point of a worker thread. Errors go back as plain records: their class and fields would be lost on the way. */
export default async function runTask(job: { name: TaskName; input: never }): Promise<Reply<unknown>> {
  try {
    const value = await tasks[job.name](job.input);
    return { ok: true, value, trouble: takeTrouble(job.input) };
  } catch (e) {
    return { ok: false, error: toErrorRecord(e) };
  }
}
