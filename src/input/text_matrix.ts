import { gunzipSync } from "node:zlib";
import { plainText } from "../model/text.js";
import { ByteFile, ImageFileError } from "./byte_file.js";
import { checkSize, NO_CLAIMS, type OpenImage, type PageShape } from "./image_types.js";

/** A matrix of 4096 × 4096 numbers of ten characters is 160 MB. */
const MAX_TEXT_BYTES = 256 * 1024 * 1024;
/** Deflate packs at most 1032 bytes into one. */
const MAX_RATIO = 1032;
const MISSING = /^(nan|na|n\/a|null|--?|)$/i;
const INFINITE = /^([+-]?)inf(inity)?$/i;
const DECIMAL_COMMA = /^[+-]?\d+,\d+/;
const NUMBER = /^[+-]?(\d+\.?\d*|\.\d+)([eEdD][+-]?\d+)?$/;

/**
 * Opens a matrix written as plain text, a line a row: values separated by commas, semicolons, tabs or blanks (told by the first
 * row), with a decimal point; `nan` or nothing between two separators for a pixel that was not measured. Lines that begin
 * with # or % are comments. One page; gzip allowed. Throws ImageFileError with the line of what it cannot take.
 */
export function openTextMatrix(path: string): OpenImage {
  const shape: PageShape = { ...parseMatrix(readText(path), null), type: "text", planes: 1, complex: false };
  return {
    format: "text",
    pages: [shape],
    claims: NO_CLAIMS,
    read: (page, scale) =>
      Promise.resolve().then(() => {
        if (page !== 0) throw new ImageFileError("no such page; a text file has one", "give page 0, or none", page);
        const out = new Float32Array(shape.rows * shape.cols);
        const again = parseMatrix(readText(path), { out, scale });
        if (again.rows !== shape.rows || again.cols !== shape.cols) {
          throw new ImageFileError("the file changed while it was read", "run again when it is written");
        }
        return out;
      }),
    close: () => Promise.resolve(),
  };
}

/**
 * The text of a file, unpacked where it is gzip; never more than `most` bytes, whatever its header promises. Throws ImageFileError.
 */
export function readText(path: string, most = MAX_TEXT_BYTES): string {
  const file = new ByteFile(path);
  try {
    const tooLong = (bytes: number): ImageFileError =>
      new ImageFileError(`${bytes} bytes of text; at most ${most} are read`, "save it as 32-bit float TIFF or as .npy");
    if (file.bytes > most) throw tooLong(file.bytes);
    const bytes = file.read(0, file.bytes);
    if (!isGzip(bytes)) return decode(bytes);
    // The last four bytes promise the length; a false promise ends where `most` or the packing's own limit is reached.
    const promised = bytes.length >= 18 ? bytes.readUInt32LE(bytes.length - 4) : 0;
    if (promised > most && promised <= bytes.length * MAX_RATIO) throw tooLong(promised);
    try {
      return decode(gunzipSync(bytes, { maxOutputLength: Math.min(most, Math.max(64, bytes.length * MAX_RATIO)) }));
    } catch (e) {
      if (e instanceof ImageFileError) throw e;
      const words = e instanceof Error ? e.message : String(e);
      throw new ImageFileError(`its gzip data cannot be unpacked (${words})`, "copy the file again", null, e);
    }
  } finally {
    file.close();
  }
}

export const isGzip = (lead: Uint8Array): boolean => lead[0] === 0x1f && lead[1] === 0x8b;

function decode(bytes: Uint8Array): string {
  if ((bytes[0] === 0xff && bytes[1] === 0xfe) || (bytes[0] === 0xfe && bytes[1] === 0xff)) {
    throw new ImageFileError("text in UTF-16", "save it as UTF-8 or plain ASCII");
  }
  return Buffer.from(bytes.buffer, bytes.byteOffset, bytes.length)
    .toString("utf8")
    .replace(/^\ufeff/, "");
}

/** Rows and columns; the values times `scale` go to `into.out`. */
function parseMatrix(
  text: string,
  into: { readonly out: Float32Array; readonly scale: number } | null,
): { readonly rows: number; readonly cols: number } {
  let rows = 0;
  let cols = 0;
  let gap = 0;
  let separator: string | null = null;
  let line = 0;
  for (let from = 0; from < text.length;) {
    const n = text.indexOf("\n", from);
    const content = text.slice(from, n < 0 ? text.length : n);
    from = n < 0 ? text.length : n + 1;
    line++;
    const trimmed = content.trim();
    if (trimmed.startsWith("#") || trimmed.startsWith("%")) continue;
    // A line of nothing but separators is a row of pixels that were not measured.
    if (trimmed === "" && !(separator !== null && content.includes(separator))) {
      if (rows > 0 && gap === 0) gap = line;
      continue;
    }
    if (gap > 0) throw wrong(gap, "an empty line between rows", "one matrix a file: take the empty line out");
    if (rows === 0) {
      separator = ["\t", ";", ","].find((s) => trimmed.includes(s)) ?? null;
      checkFirst(trimmed, separator);
    }
    const cells = separator === null ? trimmed.split(/\s+/) : content.split(separator);
    if (rows === 0) cols = cells.length;
    else if (cells.length !== cols) {
      throw wrong(line, `${cells.length} values; the first row has ${cols}`, "give every row as many values");
    }
    if (into === null) checkSize(rows + 1, cols, null);
    for (let j = 0, k = rows * cols; j < cols; j++, k++) {
      const v = numberOf(cells[j].trim(), line);
      if (into !== null && k < into.out.length) into.out[k] = v * into.scale;
    }
    rows++;
  }
  if (rows === 0) throw new ImageFileError("no numbers in it", "give the file that holds the image");
  return { rows, cols };
}

/** A first line without one number is not a matrix at all; a single wrong value is told with its line later. */
function checkFirst(first: string, separator: string | null): void {
  const cells = first.split(separator ?? /\s+/).map((c) => c.trim());
  if (cells.some((c) => isNumber(c) || DECIMAL_COMMA.test(c))) return;
  throw new ImageFileError(
    `text that begins with "${plainText(first.slice(0, 40))}", not a matrix of numbers; TIFF, .npy, HDF5 and text matrices are read`,
    "save it as 32-bit float TIFF or as .npy; begin lines above a matrix with #",
  );
}

const isNumber = (s: string): boolean => NUMBER.test(s) || MISSING.test(s) || INFINITE.test(s);

function numberOf(s: string, line: number): number {
  if (NUMBER.test(s)) return Number(s.replace(/[dD]/, "e"));
  if (MISSING.test(s)) return NaN;
  const infinite = INFINITE.exec(s);
  if (infinite !== null) return infinite[1] === "-" ? -Infinity : Infinity;
  throw wrong(
    line,
    `"${plainText(s.slice(0, 40))}" is not a number`,
    DECIMAL_COMMA.test(s)
      ? "write a point for the decimals, not a comma"
      : "write nan for a pixel that was not measured",
  );
}

const wrong = (line: number, what: string, fix: string): ImageFileError =>
  new ImageFileError(`line ${line}: ${what}`, fix);
