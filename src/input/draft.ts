import { basename, resolve } from "node:path";
import { InputError } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { collectImages } from "./draft_collect.js";
import { planSeries } from "./draft_plan.js";
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
    const shown = plan.unplaced.slice(0, 8);
    const more = plan.unplaced.length - shown.length;
    throw new InputError([
      ...shown.map((u) => ({
        at: plainText(u.written),
        problem: plainText(u.why),
        fix: "name the files by channel, branch and temperature, as in cooling_amplitude_165K.tif",
      })),
      {
        at: plainText(folder),
        problem: `none of ${countOf(plan.unplaced.length, "image")} could be placed in a series${more > 0 ? `; ${more} more are like those above` : ""}`,
        fix: "rename them, or write cooldown.yaml by hand",
      },
    ]);
  }
  return draftText(basename(resolve(folder)), plan, collected);
}
