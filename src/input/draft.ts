import { basename, resolve } from "node:path";
import { InputError } from "../model/errors.js";
import { plainText } from "../model/text.js";
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
  return draftText(basename(resolve(folder)), planSeries(collected.images), collected);
}
