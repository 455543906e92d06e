import { createInterface } from "node:readline/promises";
import { UsageError } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { planRemoval, remove, type Removal } from "../store/forget.js";
import { openForChange, openForReading } from "../store/open.js";
import { print, say } from "./say.js";

export interface ForgetOptions {
  readonly db: string;
  readonly analysis?: string;
  readonly yes?: boolean;
}

function describe(r: Removal): string {
  const name = plainText(r.cooldown);
  const lines = [
    r.whole
      ? `all of cooldown ${name} (sample ${plainText(r.sample)}, region ${plainText(r.region ?? "not named")}):`
      : `of cooldown ${name}:`,
    ...r.analyses.map(
      (a) =>
        `  analysis ${a.id}, ${a.made_at.slice(0, 16).replace("T", " ")} UTC, coldseam ${plainText(a.program_version)}: ` +
        `${countOf(a.frames, "frame")}, ${countOf(a.profiles, "wall profile")}`,
    ),
  ];
  if (r.answersThen !== null) lines.push(`  analysis ${r.answersThen} answers from then on`);
  return lines.join("\n");
}

async function confirmed(): Promise<boolean> {
  const terminal = createInterface({ input: process.stdin, output: process.stderr });
  try {
    const answer = await terminal.question("remove it? The images stay where they are. [y/N] ");
    return /^y(es)?$/i.test(answer.trim());
  } finally {
    terminal.close();
  }
}

/** `coldseam forget`: removes one cooldown, or one of its analyses, after asking. */
export async function forget(name: string, o: ForgetOptions): Promise<void> {
  const analysis = o.analysis === undefined ? null : Number(o.analysis);
  if (analysis !== null && !Number.isInteger(analysis))
    throw new UsageError(`--analysis ${String(o.analysis)}: expected a number`, "`coldseam cooldowns` lists them");
  // Nobody holds the database while somebody thinks about the answer.
  const look = openForReading(o.db);
  let planned: Removal;
  try {
    planned = planRemoval(look, name, analysis);
  } finally {
    look.close();
  }
  say(describe(planned));
  if (o.yes !== true) {
    if (process.stdin.isTTY !== true)
      throw new UsageError("forget asks before it removes, and there is no terminal to ask on", "add --yes");
    if (!(await confirmed())) {
      say("nothing was removed");
      process.exitCode = 1;
      return;
    }
  }
  const db = openForChange(o.db);
  try {
    remove(db, planned);
  } finally {
    db.close();
  }
  const what = planned.whole ? "cooldown" : `analysis ${planned.analyses.map((a) => a.id).join(", ")} of`;
  print(`removed ${what} ${plainText(name)} from ${o.db}; the next ingest uses its space again\n`);
}
