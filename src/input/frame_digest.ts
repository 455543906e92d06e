import { createHash } from "node:crypto";
import { endianness } from "node:os";
import type { Cooldown, FrameInfo, RawFrame } from "../model/cooldown.js";
import { colsOf, dataOf, rowsOf, type Raster } from "../model/raster.js";
import { loadFrame } from "./load_frame.js";

/** SHA-256 of the values of a frame's images, as loaded: the same whatever kind of file or page they come from, so that a frame is
 *  known again in a longer stack or another format. A pixel that was not measured counts as such, however its NaN is written. */
export function frameDigest(frame: Pick<RawFrame, "topography" | "amplitude" | "phase">): string {
  const hash = createHash("sha256");
  for (const image of [frame.topography, frame.amplitude, frame.phase]) {
    hash.update(image === null ? "none;" : `${rowsOf(image)} x ${colsOf(image)};`);
    if (image !== null) hash.update(plainBytes(image));
  }
  return hash.digest("hex");
}

/** The digest of a frame's images whatever the user leaves out of them: a frame is the same frame after an exclusion as before.
 *  @param loaded the frame as `loadFrame` gives it; it is read once more where something is left out */
export async function imagesDigest(
  cooldown: Pick<Cooldown, "pixel">,
  info: FrameInfo,
  loaded: RawFrame | null = null,
): Promise<string> {
  const { excluded, excludedRegions = [], ...whole } = info;
  if (loaded !== null && excluded === undefined && excludedRegions.length === 0) return frameDigest(loaded);
  return frameDigest(await loadFrame(cooldown, whole));
}

const NAN_BITS = 0x7fc00000;
const INFINITY_BITS = 0x7f800000;

/** Little-endian float32, every NaN alike. */
function plainBytes(image: Raster): Uint8Array {
  const bits = new Uint32Array(dataOf(image).slice().buffer);
  for (let p = 0; p < bits.length; p++) if ((bits[p] & 0x7fffffff) > INFINITY_BITS) bits[p] = NAN_BITS;
  const bytes = Buffer.from(bits.buffer);
  return endianness() === "LE" ? bytes : bytes.swap32();
}
