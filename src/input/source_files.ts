import { createHash } from "node:crypto";
import { createReadStream } from "node:fs";
import { finished } from "node:stream/promises";
import type { FrameInfo, SourceFile } from "../model/cooldown.js";
import { InputError } from "../model/errors.js";
import { plainText } from "../model/text.js";
import { systemWords } from "./image_file.js";
import { shownPath } from "./source_path.js";

/** SHA-256 and length of a file, read in pieces. Throws InputError where it cannot be read. */
export async function hashFile(path: string, shown: string): Promise<SourceFile> {
  const hash = createHash("sha256");
  const stream = createReadStream(path, { highWaterMark: 1 << 20 });
  try {
    stream.on("data", (piece) => hash.update(piece));
    await finished(stream);
  } catch (e) {
    throw new InputError(
      { at: plainText(shown), problem: systemWords(e), fix: "leave the files alone while they are read" },
      e,
    );
  }
  return { path: shown, sha256: hash.digest("hex"), bytes: stream.bytesRead };
}

/** A file that is in memory already: what is kept is the digest of exactly what was read. */
export function sourceOf(path: string, folder: string, content: Buffer): SourceFile {
  const sha256 = createHash("sha256").update(content).digest("hex");
  return { path: shownPath(folder, path), sha256, bytes: content.length };
}

/** Every image file of the frames, once each, in the order in which they are named. */
export function imageFiles(frames: readonly FrameInfo[]): string[] {
  const files = new Set<string>();
  for (const frame of frames) {
    for (const channel of ["topography", "amplitude", "phase"] as const) {
      const s = frame.sources[channel];
      for (const place of [s, s?.imaginary, s?.retrace]) if (place !== undefined) files.add(place.file);
    }
  }
  return [...files];
}
