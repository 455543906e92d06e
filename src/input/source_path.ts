import { realpathSync } from "node:fs";
import { isAbsolute, relative, resolve, sep } from "node:path";

/** A path as written in the YAML file or a table: `stack.tif`, `stack.tif#3`, `stack.tif#3:1`, `run.h5:/entry/data/amplitude#3`. */
export interface WrittenPath {
  readonly file: string;
  /** Path inside an HDF5 file, from its root; null: none named. */
  readonly dataset: string | null;
  /** null: no page named. */
  readonly page: number | null;
  /** Which of several values a pixel; null: none named. `#:1` names a sample of all pages. */
  readonly sample: number | null;
}

/** The parts of a written path. A colon before a slash begins a dataset, but for a drive letter. */
export function splitPath(written: string): WrittenPath {
  const m = /^(.+)#(?=[\d:])(\d{1,6})?(?::(\d{1,3}))?$/s.exec(written);
  const place = m?.[1] ?? written;
  const d = /^(.{2,}?):(\/.*)$/s.exec(place);
  const number = (text: string | undefined): number | null => (text === undefined ? null : Number(text));
  return { file: d?.[1] ?? place, dataset: d?.[2] ?? null, page: number(m?.[2]), sample: number(m?.[3]) };
}

/** The same path with another page, `null` for none. */
export function withPage(written: string, page: number | null): string {
  const { file, dataset, sample } = splitPath(written);
  const place = dataset === null ? file : `${file}:${dataset}`;
  if (page === null && sample === null) return place;
  return `${place}#${page ?? ""}${sample === null ? "" : `:${sample}`}`;
}

/** Where a written path leads, or why it must not be followed. */
export type Located = { readonly path: string } | { readonly refused: string; readonly fix: string };

/**
 * Absolute path of a file named in a YAML file of `folder`. A path that leaves the folder, by `..`, as an absolute path or through a
 * link, is refused unless `allowOutside`: a description from somebody else must not make the program read other files.
 */
export function locate(folder: string, written: string, allowOutside: boolean): Located {
  if (written.includes("\0")) return { refused: "a name with a zero byte", fix: "give the file's name" };
  const path = resolve(folder, written);
  if (allowOutside) return { path };
  const fix = "move the file below the YAML file's folder, or run with --allow-outside";
  if (isAbsolute(written)) return { refused: "an absolute path, outside the YAML file's folder", fix };
  if (!isBelow(folder, path)) return { refused: "a path that leads out of the YAML file's folder", fix };
  const [realFolder, realPath] = [real(folder), real(path)];
  if (realFolder !== null && realPath !== null && !isBelow(realFolder, realPath)) {
    return { refused: "a link that leads out of the YAML file's folder", fix };
  }
  return { path };
}

/** `path` as the user would write it from `folder`; absolute where it lies elsewhere. Always with forward slashes. */
export function shownPath(folder: string, path: string): string {
  const shown = isBelow(folder, path) ? relative(folder, path) : path;
  return shown.split(sep).join("/");
}

function isBelow(folder: string, path: string): boolean {
  const way = relative(folder, path);
  return way !== "" && way !== ".." && !way.startsWith(`..${sep}`) && !isAbsolute(way);
}

/** null where the file does not exist or cannot be reached: opening it will say so. */
function real(path: string): string | null {
  try {
    return realpathSync(path);
  } catch {
    return null;
  }
}
