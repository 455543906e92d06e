import pc from "picocolors";
import { InputError, UsageError } from "../model/errors.js";
import { plainText } from "../model/text.js";
import { programCall } from "./called.js";

/** Words for people go to standard error, results to standard output. */
export function say(line: string): void {
  process.stderr.write(`${line}\n`);
}

/** On a terminal no character of a name may steer it; a pipe and a file get every byte. */
export function print(text: string): void {
  process.stdout.write(process.stdout.isTTY ? shownText(text) : text);
}

/** Every control character but line ends and tabs made visible. */
export const shownText = (text: string): string => text.replace(/[^\n\t]+/g, plainText);

/** Advice with its commands written as this program was called. */
const asCalled = (fix: string): string => plainText(fix).replaceAll("`coldseam ", () => `\`${programCall()} `);

/** Prints an error in the one shape that all have, and returns the exit code that goes with it. */
export function sayError(e: unknown, verbose: boolean): number {
  const red = pc.createColors(process.stderr.isTTY === true).red;
  if (e instanceof InputError) {
    for (const p of e.problems) {
      say(`${red("coldseam")}: ${plainText(p.at)}: ${plainText(p.problem)}`);
      say(`  fix: ${asCalled(p.fix)}`);
    }
    if (e.problems.length > 1) say(`${e.problems.length} problems; nothing was written`);
    if (verbose && e.stack !== undefined) say(e.stack);
    return 1;
  }
  if (e instanceof UsageError) {
    say(`${red("coldseam")}: ${plainText(e.message)}`);
    say(`  fix: ${asCalled(e.fix)}`);
    return 2;
  }
  if (e instanceof Error && e.name === "AbortError") {
    say("coldseam: stopped; the database is as it was");
    return 130;
  }
  const message = e instanceof Error ? e.message : String(e);
  say(`${red("coldseam")}: a fault of the program: ${message}`);
  say("  fix: please report it with the command and, if you can, the files; --verbose shows where");
  if (verbose && e instanceof Error && e.stack !== undefined) say(e.stack);
  return 1;
}
