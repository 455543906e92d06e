import * as zlib from "node:zlib";
import { ImageFileError } from "./byte_file.js";

const DAMAGED = "the file is damaged: copy it again, or save it uncompressed";

/**
 * One strip or tile, decompressed. Never makes more than `most` bytes, whatever the data ask for (a few kilobytes can be made to
 * swell to gigabytes). Throws ImageFileError where the data are damaged or give fewer than `least` bytes.
 * Source: TIFF Revision 6.0, sections 9 (PackBits) and 13 (LZW); deflate is RFC 1950.
 */
export function decompress(data: Uint8Array, compression: number, least: number, most: number): Uint8Array {
  let out: Uint8Array;
  if (compression === 1) out = data.length > most ? data.subarray(0, most) : data;
  else if (compression === 5) out = unpackLzw(data, most);
  else if (compression === 32773) out = unpackBits(data, most);
  else if (compression === ZSTD) out = unpackZstd(data, most);
  else out = inflate(data, most);
  if (out.length < least) {
    throw new ImageFileError(`a strip or tile unpacks to ${out.length} bytes; expected ${least}`, DAMAGED);
  }
  return out;
}

export const ZSTD = 50000;
type Unpack = (data: Uint8Array, options: { readonly maxOutputLength: number }) => Uint8Array;
const isUnpack = (v: unknown): v is Unpack => typeof v === "function";
/** Node's own from 22.15 on; older ones have none. */
const zstd: unknown = Reflect.get(zlib, "zstdDecompressSync");
export const canUnpackZstd = isUnpack(zstd);

function unpackZstd(data: Uint8Array, most: number): Uint8Array {
  if (!isUnpack(zstd)) throw new ImageFileError("ZSTD data, which this Node.js cannot unpack", "save it uncompressed");
  try {
    return zstd(data, { maxOutputLength: most });
  } catch (e) {
    const words = e instanceof Error ? e.message : String(e);
    throw new ImageFileError(`its ZSTD data cannot be unpacked (${words})`, DAMAGED, null, e);
  }
}

function inflate(data: Uint8Array, most: number): Uint8Array {
  try {
    return zlib.inflateSync(data, { maxOutputLength: most });
  } catch (e) {
    throw new ImageFileError(
      `its deflate data cannot be unpacked (${e instanceof Error ? e.message : String(e)})`,
      DAMAGED,
      null,
      e,
    );
  }
}

const CLEAR = 256;
const END = 257;

/** Codes of 9 to 12 bits, most significant bit first; the width grows one code early, as all TIFF writers do. */
function unpackLzw(data: Uint8Array, most: number): Uint8Array {
  if (data.length > 1 && data[0] === 0 && (data[1] & 1) === 1) {
    throw new ImageFileError("packed with the LZW of before 1990, bits in reverse order", "save it uncompressed");
  }
  const out = new Uint8Array(most);
  // Each code stands for a piece of what is already written: where it starts and how long it is.
  const starts = new Uint32Array(4096);
  const lengths = new Uint32Array(4096);
  let n = 0;
  let next = 258;
  let width = 9;
  let bits = 0;
  let held = 0;
  let previousStart = -1;
  let previousLength = 0;
  for (let i = 0; n < most;) {
    while (held < width && i < data.length) {
      bits = ((bits << 8) | data[i++]) & 0xffffff;
      held += 8;
    }
    if (held < width) break;
    held -= width;
    const code = (bits >> held) & ((1 << width) - 1);
    if (code === END) break;
    if (code === CLEAR) {
      next = 258;
      width = 9;
      previousStart = -1;
      continue;
    }
    const start = n;
    let length: number;
    if (code < CLEAR) {
      out[n++] = code;
      length = 1;
    } else {
      const known = code < next;
      if (previousStart < 0 || (!known && code !== next)) {
        throw new ImageFileError("its LZW data hold a code that was never made", DAMAGED);
      }
      const from = known ? starts[code] : previousStart;
      length = known ? lengths[code] : previousLength + 1;
      const end = Math.min(most, n + length);
      for (let k = from; n < end; k++) out[n++] = out[k];
    }
    if (previousStart >= 0 && next < 4096) {
      // The piece before and the first byte of this one lie side by side in what is written.
      starts[next] = previousStart;
      lengths[next] = previousLength + 1;
      next++;
      if (next === (1 << width) - 1 && width < 12) width++;
    }
    previousStart = start;
    previousLength = length;
  }
  return out.subarray(0, n);
}

function unpackBits(data: Uint8Array, most: number): Uint8Array {
  const out = new Uint8Array(most);
  let n = 0;
  for (let i = 0; i < data.length && n < most;) {
    const head = data[i++];
    if (head === 128) continue;
    const length = Math.min(head < 128 ? head + 1 : 257 - head, most - n);
    if (head < 128) {
      const piece = data.subarray(i, i + length);
      out.set(piece, n);
      n += piece.length;
      i += head + 1;
    } else {
      if (i >= data.length) break;
      out.fill(data[i++], n, n + length);
      n += length;
    }
  }
  return out.subarray(0, n);
}

/**
 * Undoes TIFF's predictors in place: 2 stores differences along a row, 3 differences of the bytes of floats sorted by significance.
 * @param rows    rows of `cols` values that lie whole in `data`
 * @param samples values a pixel; differences are between values of the same kind
 * @returns whether the values are now big-endian whatever the file's byte order (predictor 3 stores them so)
 * Source: TIFF Revision 6.0, section 14; Adobe Photoshop TIFF Technical Note 3 (2005) for predictor 3.
 */
export function unpredict(
  data: Uint8Array,
  predictor: number,
  rows: number,
  cols: number,
  bytes: number,
  littleEndian: boolean,
  samples = 1,
): boolean {
  if (predictor === 1) return !littleEndian;
  const rowBytes = cols * bytes;
  if (predictor === 2) {
    for (let i = 0; i < rows; i++) addAlong(data, i * rowBytes, cols, bytes, littleEndian, samples);
    return !littleEndian;
  }
  const sorted = new Uint8Array(rowBytes);
  for (let i = 0; i < rows; i++) {
    const row = data.subarray(i * rowBytes, (i + 1) * rowBytes);
    for (let k = samples; k < rowBytes; k++) row[k] = row[k] + row[k - samples];
    for (let j = 0; j < cols; j++) for (let b = 0; b < bytes; b++) sorted[j * bytes + b] = row[b * cols + j];
    row.set(sorted);
  }
  return true;
}

/** Running sums modulo 2^(8·bytes) along one row, in the file's byte order, a byte at a time with the carry. */
function addAlong(
  data: Uint8Array,
  start: number,
  cols: number,
  bytes: number,
  littleEndian: boolean,
  samples: number,
): void {
  const first = littleEndian ? 0 : bytes - 1;
  const step = littleEndian ? 1 : -1;
  const back = bytes * samples;
  for (let j = samples; j < cols; j++) {
    const at = start + j * bytes + first;
    let carry = 0;
    for (let b = 0, k = at; b < bytes; b++, k += step) {
      const s = data[k] + data[k - back] + carry;
      data[k] = s;
      carry = s >> 8;
    }
  }
}
