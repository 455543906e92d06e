import { basename, resolve } from "node:path";
import { InputError, type Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { collectImages } from "./draft_collect.js";
import { planSeries, type Unplaced } from "./draft_plan.js";
import { draftText, type Draft } from "./draft_yaml.js";

/** Drafts the description of a folder of images from their headers and names; writes nothing. Throws InputError where there is no image. */
export async function draftCooldown(folder: string): Promise<Draft> {
  const collected = await collectImages(folder);
  if (collected.images.length === 0) {
    const first = collected.unread[0];
    throw new InputError({
      at: plainText(folder),
      problem: `no image that can be read${first === undefined ? "" : ` (${plainText(first.written)}: ${first.why})`}`,
      fix: "give the folder with the TIFF, .npy, HDF5 or text files of one cooldown",
    });
  }
  const plan = planSeries(collected.images);
  if (plan.series.length === 0) {
    throw new InputError(reasons(folder, plan.unplaced));
  }
  return draftText(basename(resolve(folder)), plan, collected);
}

/** One problem a reason, with the first of the files that share it. */
function reasons(folder: string, unplaced: readonly Unplaced[]): Problem[] {
  const by = new Map<string, Unplaced[]>();
  for (const u of unplaced) by.set(u.why, [...(by.get(u.why) ?? []), u]);
  const all = [...by].map(([why, files]): Problem => {
    const names = files.slice(0, 3).map((u) => plainText(u.written));
    const more = files.length > names.length ? `, and ${files.length - names.length} more` : "";
    return {
      at: plainText(folder),
      problem: `${countOf(files.length, "image")} could not be placed in a series: ${plainText(why)}: ${names.join(", ")}${more}`,
      fix: files[0].fix,
    };
  });
  const most = 8;
  if (all.length <= most) return all;
  const problem = `and ${countOf(all.length - most, "reason")} more`;
  return [...all.slice(0, most), { at: plainText(folder), problem, fix: "mend the first ones first" }];
}
