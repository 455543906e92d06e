import type { Notice } from "../model/cooldown.js";
import { InputError, type Problem } from "../model/errors.js";
import { plainText } from "../model/text.js";
import { describeCooldown, inspectFrame, loadFrame, readCooldown } from "../input/index.js";
import { print, say } from "./say.js";

interface CheckOptions {
  readonly allowOutside?: boolean;
}

/** `coldseam check`: everything is read, every pixel too; all problems are said at once. */
export async function check(yaml: string, o: CheckOptions): Promise<void> {
  const cooldown = await readCooldown(yaml, { allowOutside: o.allowOutside === true, hashSources: false });
  print(`${describeCooldown(cooldown).join("\n")}\n`);
  const problems: Problem[] = [];
  const notices: Notice[] = [...cooldown.notices];
  for (const info of cooldown.frames) {
    try {
      notices.push(...inspectFrame(await loadFrame(cooldown, info)));
    } catch (e) {
      if (!(e instanceof InputError)) throw e;
      problems.push(...e.problems);
    }
  }
  for (const n of notices) say(`note: ${n.frame === null ? "" : `frame ${n.frame}: `}${plainText(n.message)}`);
  if (problems.length > 0) throw new InputError(problems);
  print(
    `ready: ${cooldown.frames.length} frames read, ${notices.length === 0 ? "nothing to remark" : `${notices.length} remarks`}\n`,
  );
  print(`next: coldseam ingest ${plainText(yaml)} --db FILE.sqlite\n`);
}
