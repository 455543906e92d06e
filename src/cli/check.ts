import type { Notice } from "../model/cooldown.js";
import { InputError, type Problem } from "../model/errors.js";
import { countOf } from "../model/text.js";
import { describeCooldown, inspectFrame, loadFrame, sizeProblems, surveyCooldown } from "../input/index.js";
import { command } from "./called.js";
import { noticeLines } from "./notice_lines.js";
import { print, say } from "./say.js";

interface CheckOptions {
  readonly allowOutside?: boolean;
}

/** `coldseam check`, of the files that describe one cooldown: everything is read, every pixel too; all problems of description, files and pixels are said at once. */
export async function check(yaml: readonly string[], o: CheckOptions): Promise<void> {
  const survey = await surveyCooldown(yaml, { allowOutside: o.allowOutside === true, hashSources: false });
  const { cooldown, frames } = survey;
  if (cooldown !== null) print(`${describeCooldown(cooldown).join("\n")}\n`);
  const problems: Problem[] = [...survey.problems, ...sizeProblems(survey.frames)];
  const notices: Notice[] = [...(cooldown ?? survey).notices];
  // The images that can be read are looked at also where the description has mistakes; a size of 1 nm stands in for a missing one.
  const pixel = survey.pixel ?? { xNm: 1, yNm: 1 };
  for (const info of frames) {
    try {
      notices.push(...inspectFrame(await loadFrame({ pixel }, info), info));
    } catch (e) {
      if (!(e instanceof InputError)) throw e;
      problems.push(...e.problems);
    }
  }
  const remarks = noticeLines(notices);
  for (const line of remarks) say(line);
  if (problems.length > 0) throw new InputError(problems);
  print(
    `ready: ${countOf(frames.length, "frame")} read, ${remarks.length === 0 ? "nothing to remark" : countOf(remarks.length, "remark")}\n`,
  );
  print(`next: ${command("ingest", ...yaml, "--db", "FILE.sqlite")}\n`);
}
