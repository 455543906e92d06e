/** What is wrong with the user's input, as data: it must survive a worker thread and be printed in one shape. */
export interface Problem {
  /** File, and place in it: `cooling_phase.tif#3`, `cooldown.yaml:12:5`. */
  readonly at: string;
  /** What was found and what was expected. */
  readonly problem: string;
  /** What the user can do about it. */
  readonly fix: string;
}

/** Bad input (exit code 1). Several problems may be reported at once; the first is the message. */
export class InputError extends Error {
  readonly problems: readonly Problem[];
  constructor(problems: Problem | readonly Problem[], cause?: unknown) {
    const list = Array.isArray(problems) ? (problems as readonly Problem[]) : [problems as Problem];
    super(list.map((p) => `${p.at}: ${p.problem}`).join("\n"), cause === undefined ? undefined : { cause });
    this.name = "InputError";
    this.problems = list;
  }
}

/** The command line was wrong (exit code 2). */
export class UsageError extends Error {
  readonly fix: string;
  constructor(problem: string, fix: string) {
    super(problem);
    this.name = "UsageError";
    this.fix = fix;
  }
}

/** An error as a plain record, for the way between threads (classes and own fields are lost there). */
export type ErrorRecord =
  | { readonly kind: "input"; readonly problems: readonly Problem[] }
  | { readonly kind: "other"; readonly message: string; readonly stack: string };

export function toErrorRecord(e: unknown): ErrorRecord {
  if (e instanceof InputError) return { kind: "input", problems: e.problems };
  if (e instanceof Error) return { kind: "other", message: e.message, stack: e.stack ?? "" };
  return { kind: "other", message: String(e), stack: "" };
}

export function fromErrorRecord(r: ErrorRecord): Error {
  if (r.kind === "input") return new InputError(r.problems);
  const e = new Error(r.message);
  e.stack = r.stack;
  return e;
}
