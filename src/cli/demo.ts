import { existsSync, readdirSync } from "node:fs";
import { UsageError } from "../model/errors.js";
import { writeDemo } from "../demo/index.js";
import { print, say } from "./say.js";

interface DemoCommandOptions {
  readonly seed?: string;
  readonly size: "full" | "small";
}

/** `coldseam demo`: the invented cooldowns as files, their truth beside them. Returns the YAML files. */
export function demo(dir: string, o: DemoCommandOptions): string[] {
  if (existsSync(dir) && readdirSync(dir).length > 0)
    throw new UsageError(`demo ${dir}: the folder is not empty`, "name a new folder; nothing is written over");
  const seed = o.seed === undefined ? undefined : Number(o.seed);
  if (seed !== undefined && !Number.isInteger(seed))
    throw new UsageError(`--seed ${o.seed}: expected a whole number`, "leave it out for the usual one");
  say("making an invented film, two cooldowns of one region …");
  const files = writeDemo(dir, { size: o.size, ...(seed === undefined ? {} : { seed }) });
  for (const f of files) print(`${f}\n`);
  return files;
}
