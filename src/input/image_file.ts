import { statSync } from "node:fs";
import { ByteFile, ImageFileError } from "./byte_file.js";
import type { OpenImage } from "./image_types.js";
import { openNpy } from "./npy.js";
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
 * Throws ImageFileError where it is missing, unreadable, no TIFF or .npy, or damaged.
 */
export async function withImage<T>(path: string, f: (image: OpenImage) => T | Promise<T>): Promise<T> {
  const stamp = stampOf(path);
  let entry = open.get(path);
  if (entry !== undefined && entry.stamp !== stamp && entry.users === 0) {
    open.delete(path);
    await entry.image.close();
    entry = undefined;
  }
  entry ??= { image: openImage(path), stamp, users: 0 };
  open.delete(path);
  open.set(path, entry); // last in line to be closed
  entry.users++;
  try {
    return await f(entry.image);
  } finally {
    entry.users--;
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

function openImage(path: string): OpenImage {
  try {
    const format = formatOf(path);
    return format === "npy" ? openNpy(path) : openTiff(path);
  } catch (e) {
    if (e instanceof ImageFileError) throw e;
    throw new ImageFileError(systemWords(e), "check that the file may be read", null, e);
  }
}

/** Told by the first bytes, whatever the name says. */
function formatOf(path: string): "tiff" | "npy" {
  const file = new ByteFile(path);
  try {
    if (file.bytes === 0) throw new ImageFileError("the file is empty", "copy it again from where it was measured");
    const lead = file.read(0, Math.min(8, file.bytes));
    const text = lead.toString("latin1");
    if (/^(II[*+]\0|MM\0[*+])/.test(text)) return "tiff";
    if (text.startsWith("\x93NUMPY")) return "npy";
    throw new ImageFileError(`${whatItIs(text)}; TIFF and .npy are read`, "save it as 32-bit float TIFF or as .npy");
  } finally {
    file.close();
  }
}

function whatItIs(lead: string): string {
  if (lead.startsWith("\x89HDF")) return "an HDF5 file";
  if (lead.startsWith("\x89PNG")) return "a PNG picture";
  if (lead.startsWith("\xff\xd8")) return "a JPEG picture";
  if (lead.startsWith("PK")) return "a zip archive";
  if (lead.startsWith("\x1f\x8b")) return "gzip data";
  if (/^[\t\n\r\x20-\x7e]+$/.test(lead)) return `text that begins with "${lead.replace(/[\t\n\r]/g, " ")}"`;
  return "neither a TIFF nor a .npy file";
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
