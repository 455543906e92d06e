import { readdirSync, type Dirent } from "node:fs";
import { join } from "node:path";
import { InputError } from "../model/errors.js";
import type { PixelSize } from "../model/raster.js";
import { plainText } from "../model/text.js";
import { ByteFile, ImageFileError } from "./byte_file.js";
import { nameParts, type NameParts } from "./file_names.js";
import { listHdf5 } from "./hdf5.js";
import { mayBeSamplesOfStack } from "./image_types.js";
import { closeImages, formatOf, systemWords, withImage } from "./image_file.js";

/** An image file, or one dataset of an HDF5 file, with what its headers and its name say. */
export interface FoundImage {
  /** As it is to be written in the YAML file or a table. */
  readonly written: string;
  readonly pages: number;
  readonly planes: number;
  readonly complex: boolean;
  readonly pixel: PixelSize | null;
  readonly temperaturesK: readonly number[] | null;
  readonly parts: NameParts;
}

export interface Collected {
  readonly images: readonly FoundImage[];
  /** Text files whose head names a time and a temperature. */
  readonly logs: readonly { readonly written: string; readonly time: string; readonly temperature: string }[];
  readonly unread: readonly { readonly written: string; readonly why: string }[];
}

const NAMES = /\.(tiff?|npy|h5|hdf5?|nxs|csv|tsv|txt|dat|asc)(\.gz)?$/i;
const MAX_DEPTH = 4;
const MAX_FILES = 20_000;

/** Looks at every file below `folder` whose name ends as an image's does; hidden ones and links are left alone. Throws InputError. */
export async function collectImages(folder: string): Promise<Collected> {
  const images: FoundImage[] = [];
  const logs: Collected["logs"][number][] = [];
  const unread: Collected["unread"][number][] = [];
  for (const written of filesBelow(folder)) {
    const path = join(folder, written);
    try {
      if (formatOf(path) === "hdf5") {
        for (const dataset of await listHdf5(path)) images.push(await look(path, `${written}:${dataset}`, dataset));
      } else images.push(await look(path, written, null));
    } catch (e) {
      if (!(e instanceof ImageFileError)) throw e;
      const log = logColumns(path);
      if (log === null) unread.push({ written, why: e.message });
      else logs.push({ written, ...log });
    }
  }
  await closeImages();
  return { images, logs, unread };
}

async function look(path: string, written: string, dataset: string | null): Promise<FoundImage> {
  return withImage(
    path,
    ({ pages, claims }) => ({
      written,
      ...(mayBeSamplesOfStack(pages)
        ? { pages: pages[0].planes, planes: 1 }
        : { pages: pages.length, planes: pages[0]?.planes ?? 1 }),
      complex: pages[0]?.complex ?? false,
      ...claims,
      parts: nameParts(written),
    }),
    dataset,
  );
}

function filesBelow(folder: string): string[] {
  const out: string[] = [];
  const walk = (below: string, depth: number): void => {
    let entries: Dirent[];
    try {
      entries = readdirSync(join(folder, below), { withFileTypes: true });
    } catch (e) {
      if (depth > 0) return;
      throw new InputError(
        { at: plainText(folder), problem: systemWords(e), fix: "give the folder with the images" },
        e,
      );
    }
    entries.sort((a, b) => (a.name < b.name ? -1 : 1));
    for (const entry of entries) {
      if (entry.name.startsWith(".")) continue;
      const name = below === "" ? entry.name : `${below}/${entry.name}`;
      if (entry.isDirectory() && depth < MAX_DEPTH) walk(name, depth + 1);
      else if (entry.isFile() && NAMES.test(entry.name)) out.push(name);
    }
  };
  walk("", 0);
  if (out.length > MAX_FILES) {
    const problem = `${out.length} files; at most ${MAX_FILES} are looked at`;
    throw new InputError({ at: plainText(folder), problem, fix: "give the folder of one cooldown" });
  }
  return out;
}

/** The columns of a thermometer's log, from the head of a text file. */
function logColumns(path: string): { time: string; temperature: string } | null {
  let file: ByteFile;
  try {
    file = new ByteFile(path);
  } catch {
    return null;
  }
  try {
    const text = file
      .read(0, Math.min(4096, file.bytes))
      .toString("utf8")
      .replace(/^\ufeff/, "");
    const head = text.split(/\r?\n/).find((l) => l.trim() !== "" && !l.startsWith("#")) ?? "";
    const columns = head.split(/[\t;,]/).map((c) => c.trim().replace(/^"(.*)"$/, "$1"));
    const time = columns.find((c) => /time|date|zeit/i.test(c));
    const temperature = columns.find((c) => c !== time && /temp|kelvin|^T([^a-z]|$)|\bK\b/i.test(c));
    return time === undefined || temperature === undefined ? null : { time, temperature };
  } finally {
    file.close();
  }
}
