import { createHash } from "node:crypto";
import path from "node:path";
import type { SettingRecord } from "../model/analysis.js";
import type { Branch, Cooldown } from "../model/cooldown.js";

const sha256 = (text: string): string => createHash("sha256").update(text).digest("hex");

/** JSON with sorted keys, so that equal content has equal text. */
export function canonical(value: unknown): string {
  return JSON.stringify(value, (_key, v: unknown) =>
    v !== null && typeof v === "object" && !Array.isArray(v)
      ? Object.fromEntries(Object.entries(v).sort(([a], [b]) => (a < b ? -1 : 1)))
      : v,
  );
}

/** What the user described, with the SHA-256 of every image file in the place of its path; kept with each analysis.
 *  @param images the SHA-256 of each frame's pixel values, one a frame, where the frames have been loaded */
export function description(c: Cooldown, images: readonly string[] | null = null): Record<string, unknown> {
  const folder = path.dirname(c.yamlFile);
  const sha = new Map(c.sources.map((s) => [path.resolve(folder, s.path), s.sha256]));
  return {
    sample: c.sample,
    cooldown: c.cooldown,
    region: c.region,
    pixel: c.pixel,
    tip: c.tip,
    photonEnergyMeV: c.photonEnergyMeV,
    filmThicknessNm: c.filmThicknessNm,
    amplitudeUnit: c.amplitudeUnit,
    amplitudeHarmonic: c.amplitudeHarmonic ?? null,
    frames: c.frames.map((f, k) => ({
      ...f,
      ...(images === null ? {} : { imagesSha256: images[k] }),
      sources: Object.fromEntries(
        Object.entries(f.sources).map(([channel, { file, ...s }]) => [
          channel,
          { ...s, sha256: sha.get(path.resolve(file)) ?? null },
        ]),
      ),
    })),
  };
}

/** What the files were called, where they lay, and what follows from their bytes anyway. */
const NOT_CONTENT: ReadonlySet<string> = new Set(["label", "folder", "imagesSha256"]);

/** SHA-256 of a description, whatever the names of its files: they stand in it by their own SHA-256. */
export function contentHash(described: unknown): string {
  const content = JSON.parse(JSON.stringify(described), (key, v: unknown) =>
    NOT_CONTENT.has(key) ? undefined : v,
  ) as unknown;
  return sha256(canonical(content));
}

/** What makes two ingests the same work: content, settings and program version. */
export function workHash(content: string, settings: SettingRecord, programVersion: string): string {
  return sha256(canonical({ content, settings, programVersion }));
}

/** One frame as far as it tells a cooldown from another. */
export interface FrameIdentity {
  readonly branch: Branch;
  readonly temperatureK: number;
  /** SHA-256 of its pixel values; null where they have not been looked at. */
  readonly images: string | null;
}

export interface CooldownIdentity {
  readonly sample: string;
  readonly region: string | null;
  readonly frames: readonly FrameIdentity[];
}

export function identityOf(c: Cooldown, images: readonly string[] | null): CooldownIdentity {
  const frames = c.frames.map((f, k) => ({
    branch: f.branch,
    temperatureK: f.temperatureK,
    images: images?.[k] ?? null,
  }));
  return { sample: c.sample, region: c.region, frames };
}

/** The identity in a stored description. */
export function storedIdentity(descriptionJson: string): CooldownIdentity {
  const d = JSON.parse(descriptionJson) as Omit<CooldownIdentity, "frames"> & {
    frames: (Pick<FrameIdentity, "branch" | "temperatureK"> & { imagesSha256?: string })[];
  };
  const frames = d.frames.map((f) => ({
    branch: f.branch,
    temperatureK: f.temperatureK,
    images: f.imagesSha256 ?? null,
  }));
  return { sample: d.sample, region: d.region, frames };
}

export interface Difference {
  readonly inFirst: string;
  readonly inSecond: string;
}

/** Where two cooldowns of one name differ, in words for each; null where the second is the first, or the first grown: all of its
 *  frames are there, in order, with the same pixel values. */
export function difference(first: CooldownIdentity, second: CooldownIdentity): Difference | null {
  if (first.sample !== second.sample)
    return { inFirst: `sample "${first.sample}"`, inSecond: `sample "${second.sample}"` };
  const region = (c: CooldownIdentity): string => (c.region === null ? "no region" : `region "${c.region}"`);
  if (first.region !== second.region) return { inFirst: region(first), inSecond: region(second) };
  let at = 0;
  for (const f of first.frames) {
    const name = `${f.branch} frame at ${f.temperatureK} K`;
    let other = false;
    let found = false;
    for (; at < second.frames.length && !found; at++) {
      const g = second.frames[at];
      if (g.branch !== f.branch || g.temperatureK !== f.temperatureK) continue;
      found = f.images === null || g.images === null || f.images === g.images;
      other ||= !found;
    }
    if (!found)
      return {
        inFirst: `a ${name}${other ? ` with images ${(f.images as string).slice(0, 12)}…` : ""}`,
        inSecond: other ? `a ${name} with other images` : `no such frame in that place among ${second.frames.length}`,
      };
  }
  return null;
}
