import path from "node:path";
import { plainText } from "../model/text.js";

/** How the program was called, for commands that are printed to be run: from a clone there is no `coldseam` on the path. */
export function programCall(): string {
  const event = process.env["npm_lifecycle_event"];
  if (event === "coldseam" || event === "demo") return "npm run -s coldseam --";
  const entry = process.argv[1] ?? "";
  const installed = path.basename(entry) !== "coldseam.mjs" || entry.split(path.sep).includes("node_modules");
  return installed ? "coldseam" : `node ${shellWord(path.relative(process.cwd(), entry))}`;
}

/** A command of the program as it can be run: `words` after its name, each quoted for a shell where it must be. */
export const command = (...words: readonly string[]): string => [programCall(), ...words.map(shellWord)].join(" ");

/** One word of a POSIX shell's command line. Characters that steer a terminal are shown instead of written. */
export function shellWord(s: string): string {
  const shown = plainText(s);
  return /^[\w./:,@%+-]+$/.test(shown) ? shown : `'${shown.replaceAll("'", "'\\''")}'`;
}
