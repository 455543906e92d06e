import type { Cooldown } from "../model/cooldown.js";
import { InputError, type Problem } from "../model/errors.js";
import { checkOrder } from "./check_order.js";
import { joinFiles } from "./join_files.js";
import { surveyFile, type FileSurvey, type ReadOptions, type Survey } from "./survey_file.js";

export type { ReadOptions, Survey } from "./survey_file.js";

/**
 * Reads a `cooldown.yaml`, its frame tables and the headers of its images, and checks all of it; no pixel is read. Frames stand in
 * the order of the YAML file, units are nm, K, meV, and each source carries the factor that takes its file to nm or rad.
 * Several files that describe parts of one cooldown are joined in their order.
 * Throws one InputError with every problem found: place in the file, what was found and expected, what to do.
 */
export async function readCooldown(
  yamlFiles: string | readonly string[],
  options: ReadOptions = {},
): Promise<Cooldown> {
  const { cooldown, problems } = await surveyCooldown(yamlFiles, options);
  if (cooldown === null) throw new InputError(problems);
  return cooldown;
}

/** As `readCooldown`, but hands back the problems beside what is sound. Throws InputError only where a file is no YAML at all. */
export async function surveyCooldown(
  yamlFiles: string | readonly string[],
  options: ReadOptions = {},
): Promise<Survey> {
  const files: FileSurvey[] = [];
  const unread: Problem[] = [];
  for (const yamlFile of typeof yamlFiles === "string" ? [yamlFiles] : yamlFiles) {
    try {
      files.push(await surveyFile(yamlFile, options));
    } catch (e) {
      if (!(e instanceof InputError)) throw e;
      unread.push(...e.problems);
    }
  }
  if (unread.length > 0) throw new InputError(unread);
  const survey = joinFiles(files);
  if (survey.cooldown === null || survey.frames.length === 0) return { ...survey, cooldown: null };
  const { frames, pixel, tip } = survey.cooldown;
  const notices = [...survey.notices, ...checkOrder(frames, pixel, tip?.resolutionNm ?? null)];
  return { ...survey, notices, cooldown: { ...survey.cooldown, notices } };
}
