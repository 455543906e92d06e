import { statSync } from "node:fs";
import { plainText } from "../model/text.js";
import { ByteFile, ImageFileError } from "./byte_file.js";
import { openHdf5 } from "./hdf5.js";
import type { ImageFormat, OpenImage } from "./image_types.js";
import { openNpy } from "./npy.js";
import { isGzip, openTextMatrix } from "./text_matrix.js";
import { openTiff } from "./tiff.js";

/** Open files kept a process (each worker thread has its own): enough for the stacks of one cooldown. */
const MAX_OPEN = 12;

interface Entry {
  readonly image: OpenImage;
  /** Length and time of change when it was opened. */
  readonly stamp: string;
  users: number;
}

const open = new Map<string, Entry>();

/**
 * Runs `f` on the image file at `path`, which stays open for the next call. A file that changed in between is opened afresh.
 * Throws ImageFileError where it is missing, unreadable, none of the formats that are read, or damaged.
 * @param dataset path inside an HDF5 file; null for the other formats
 */
export async function withImage<T>(
  path: string,
  f: (image: OpenImage) => T | Promise<T>,
  dataset: string | null = null,
): Promise<T> {
  const stamp = stampOf(path);
  const key = `${path}\0${dataset ?? ""}`;
  let entry = open.get(key);
  if (entry !== undefined && entry.stamp !== stamp && entry.users === 0) {
    open.delete(key);
    await entry.image.close();
    entry = undefined;
  }
  if (entry === undefined) {
    const image = await openImage(path, dataset);
    // Somebody else may have opened it while this waited.
    const other = open.get(key);
    if (other !== undefined && other.stamp === stamp) {
      await image.close();
      entry = other;
    } else entry = { image, stamp, users: 0 };
  }
  open.delete(key);
  open.set(key, entry); // last in line to be closed
  entry.users++;
  try {
    return await f(entry.image);
  } finally {
    entry.users--;
    if (entry.users === 0 && open.get(key) !== entry) await entry.image.close();
    await closeIdle(MAX_OPEN);
  }
}

/** Closes every image file that is not in use. */
export const closeImages = (): Promise<void> => closeIdle(0);

async function closeIdle(keep: number): Promise<void> {
  for (const [path, entry] of open) {
    if (open.size <= keep) return;
    if (entry.users > 0) continue;
    open.delete(path);
    await entry.image.close();
  }
}

/** Throws ImageFileError where there is no regular file. */
function stampOf(path: string): string {
  try {
    const s = statSync(path);
    if (s.isFile()) return `${s.size} ${s.mtimeMs} ${s.ino}`;
  } catch (e) {
    throw new ImageFileError(systemWords(e), "check the name and that the file is there and may be read", null, e);
  }
  throw new ImageFileError("not a file", "give the name of a file");
}

async function openImage(path: string, dataset: string | null): Promise<OpenImage> {
  try {
    const format = formatOf(path);
    if (format === "hdf5") return await openHdf5(path, dataset);
    if (dataset !== null) {
      throw new ImageFileError(
        `no HDF5 file, so it has no dataset "${plainText(dataset)}"`,
        "give the file's name alone",
      );
    }
    if (format === "npy") return openNpy(path);
    return format === "tiff" ? openTiff(path) : openTextMatrix(path);
  } catch (e) {
    if (e instanceof ImageFileError) throw e;
    throw new ImageFileError(systemWords(e), "check that the file may be read", null, e);
  }
}

/** Told by the first bytes, whatever the name says. Throws ImageFileError where they are those of no format that is read. */
export function formatOf(path: string): ImageFormat {
  const file = new ByteFile(path);
  try {
    if (file.bytes === 0) throw new ImageFileError("the file is empty", "copy it again from where it was measured");
    const lead = file.read(0, Math.min(512, file.bytes));
    const text = lead.toString("latin1");
    if (/^(II[*+]\0|MM\0[*+])/.test(text)) return "tiff";
    if (text.startsWith("\x93NUMPY")) return "npy";
    if (text.startsWith(HDF5_MARK) || hasLateMark(file)) return "hdf5";
    if (isGzip(lead) || TEXT.test(text)) return "text";
    throw new ImageFileError(
      `${whatItIs(text)}; TIFF, .npy, HDF5 and text matrices are read`,
      "save it as 32-bit float TIFF or as .npy",
    );
  } finally {
    file.close();
  }
}

/** Printable characters of any one-byte coding; or the mark that begins UTF-16, which is refused in words of its own. */
const TEXT = /^(\xff\xfe|\xfe\xff|[\t\n\r\x20-\x7e\x80-\xff]+$)/;
const HDF5_MARK = "\x89HDF\r\n\x1a\n";

/** HDF5 may begin behind a block of somebody else's, of 512 bytes or a power of two times that. */
function hasLateMark(file: ByteFile): boolean {
  for (let at = 512; at + 8 <= Math.min(file.bytes, 1 << 20); at *= 2) {
    if (file.read(at, 8).toString("latin1") === HDF5_MARK) return true;
  }
  return false;
}

function whatItIs(lead: string): string {
  if (lead.startsWith("\x89PNG")) return "a PNG picture";
  if (lead.startsWith("\xff\xd8")) return "a JPEG picture";
  if (lead.startsWith("PK")) return "a zip archive";
  return "none of the formats that are read";
}

/** A system error without the path, which the message has in front already. */
export function systemWords(e: unknown): string {
  const code = typeof e === "object" && e !== null && "code" in e ? String(e.code) : "";
  if (code === "ENOENT" || code === "ENOTDIR") return "no such file";
  if (code === "EACCES" || code === "EPERM") return "the file may not be read by this user";
  if (code === "EISDIR") return "a folder, not a file";
  if (code === "ENAMETOOLONG") return "the name is too long";
  if (code === "EMFILE") return "too many open files";
  return e instanceof Error ? e.message : String(e);
}
