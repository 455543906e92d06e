import { hashFile, imagesDigest } from "../input/index.js";
import type { Analysis } from "../model/analysis.js";
import type { Cooldown } from "../model/cooldown.js";
import { InputError, type Problem } from "../model/errors.js";
import { plainText } from "../model/text.js";
import { canonical } from "../store/identity.js";
import { checkName, knownCooldown } from "../store/save.js";
import type { Db } from "../store/open.js";
import path from "node:path";

/** Refuses a cooldown whose name already stands for something else, before its long analysis. Its images are read only where the
 *  database knows the name. Returns how many of its frames the newest analysis there has; null where the name is new. Throws InputError. */
export async function refuseOtherContent(db: Db, cooldown: Cooldown): Promise<number | null> {
  const known = knownCooldown(db, cooldown.cooldown);
  if (known === null) return null;
  checkName(db, cooldown, null);
  const images: string[] = [];
  for (const info of cooldown.frames) images.push(await imagesDigest(cooldown, info));
  checkName(db, cooldown, images);
  return known.frames.length;
}

/** Reads every image file once more and compares it with the SHA-256 it had when the cooldown was described: what is stored must be
 *  about the bytes that its sources name. The description and the tables were read once, at that time. Throws InputError naming every
 *  file that changed or went. */
export async function refuseChangedSources(cooldown: Cooldown): Promise<void> {
  const folder = path.dirname(cooldown.yamlFile);
  const images = new Set(cooldown.frames.flatMap((f) => Object.values(f.sources).map((s) => path.resolve(s.file))));
  const problems: Problem[] = [];
  for (const s of cooldown.sources) {
    const file = path.resolve(folder, s.path);
    if (!images.has(file)) continue;
    try {
      const now = await hashFile(file, s.path);
      if (now.sha256 === s.sha256) continue;
      problems.push({
        at: plainText(s.path),
        problem: `changed while it was analysed: ${s.bytes} bytes, SHA-256 ${s.sha256.slice(0, 12)}… at first, ${now.bytes} bytes, ${now.sha256.slice(0, 12)}… now`,
        fix: "wait until it is written, then ingest again; nothing was stored",
      });
    } catch (e) {
      if (!(e instanceof InputError)) throw e;
      problems.push(...e.problems);
    }
  }
  if (problems.length > 0) throw new InputError(problems);
}

/** The cooldown whose sources are the files as they are now, where these still hold the frames that were analysed, pixel by pixel: a stack
 *  may have got another page meanwhile. null where they do not. */
export async function settle(analysis: Analysis, read: () => Promise<Cooldown>): Promise<Cooldown | null> {
  const { cooldown } = analysis;
  try {
    await refuseChangedSources(cooldown);
    return cooldown;
  } catch (e) {
    if (!(e instanceof InputError)) throw e;
  }
  const now = await read();
  const frames = now.frames.slice(0, cooldown.frames.length);
  if (canonical(frames) !== canonical(cooldown.frames)) return null;
  for (const info of frames) {
    if ((await imagesDigest(now, info)) !== analysis.frames[info.frame].imagesSha256) return null;
  }
  const settled = { ...cooldown, sources: now.sources };
  try {
    await refuseChangedSources(settled);
    return settled;
  } catch (e) {
    if (e instanceof InputError) return null;
    throw e;
  }
}
