import { ByteFile, ImageFileError } from "./byte_file.js";
import { checkSize, MAX_PAGES } from "./image_types.js";

/** Layout of one page, checked against the file's length: every strip or tile lies inside the file. */
export interface TiffPage {
  readonly rows: number;
  readonly cols: number;
  readonly bits: number;
  /** 1 unsigned, 2 signed, 3 floating point. */
  readonly sampleFormat: 1 | 2 | 3;
  readonly compression: number;
  readonly predictor: number;
  readonly littleEndian: boolean;
  readonly tiled: boolean;
  /** Size of a tile; of a strip, as wide as the image. */
  readonly blockRows: number;
  readonly blockCols: number;
  /** Byte offset and length of each strip or tile, in reading order. */
  readonly offsets: readonly number[];
  readonly byteCounts: readonly number[];
}

const COPY_AGAIN = "the file is damaged: copy it again from where it was measured";
const TAG = {
  width: 256,
  length: 257,
  bits: 258,
  compression: 259,
  photometric: 262,
  stripOffsets: 273,
  samples: 277,
  rowsPerStrip: 278,
  stripByteCounts: 279,
  predictor: 317,
  tileWidth: 322,
  tileLength: 323,
  tileOffsets: 324,
  tileByteCounts: 325,
  sampleFormat: 339,
} as const;
const WANTED = new Set<number>(Object.values(TAG));
const TYPE_BYTES: Readonly<Record<number, number>> = { 1: 1, 3: 2, 4: 4, 16: 8 };

/** Compressions that keep every bit and whose size is known before memory is taken: none, LZW, deflate (both numbers), PackBits. */
const LOSSLESS = new Set([1, 5, 8, 32946, 32773]);
const COMPRESSION_NAMES: Readonly<Record<number, string>> = {
  2: "CCITT fax",
  3: "CCITT fax",
  4: "CCITT fax",
  6: "JPEG (which changes values)",
  7: "JPEG (which changes values)",
  34712: "JPEG 2000",
  34887: "LERC",
  34925: "LZMA",
  50000: "ZSTD",
  50001: "WebP",
};

/**
 * The pages of a TIFF or BigTIFF file, from its directories alone. A cut-off file, a ring of directories, counts and sizes that no
 * scan has are refused here, before any pixel is read or memory taken.
 * Throws ImageFileError. Source: TIFF Revision 6.0 (Aldus, 1992) and the BigTIFF design.
 */
export function readTiffPages(file: ByteFile): TiffPage[] {
  if (file.bytes < 8) throw new ImageFileError(`${file.bytes} bytes; a TIFF has at least 8`, COPY_AGAIN);
  const lead = file.read(0, Math.min(16, file.bytes));
  const le = lead[0] === 0x49;
  const big = (le ? lead.readUInt16LE(2) : lead.readUInt16BE(2)) === 43;
  if (big && lead.length < 16) throw new ImageFileError("the file is cut off inside its header", COPY_AGAIN);
  const reader = new DirectoryReader(file, le, big);
  let next = big ? reader.word8(lead, 8) : reader.word4(lead, 4);
  const pages: TiffPage[] = [];
  const seen = new Set<number>();
  while (next !== 0) {
    if (seen.has(next)) throw new ImageFileError("its pages lead back to an earlier page", COPY_AGAIN, pages.length);
    if (pages.length === MAX_PAGES) throw new ImageFileError(`more than ${MAX_PAGES} pages`, "split the stack");
    seen.add(next);
    const { tags, following } = reader.directory(next, pages.length);
    pages.push(pageOf(tags, reader, pages.length));
    next = following;
  }
  if (pages.length === 0) throw new ImageFileError("no page in it", COPY_AGAIN);
  return pages;
}

interface Field {
  readonly type: number;
  readonly count: number;
  /** The value itself where it fits, else where it lies. */
  readonly inline: Buffer;
}

class DirectoryReader {
  readonly #file: ByteFile;
  readonly littleEndian: boolean;
  readonly #big: boolean;
  constructor(file: ByteFile, littleEndian: boolean, big: boolean) {
    this.#file = file;
    this.littleEndian = littleEndian;
    this.#big = big;
  }

  get fileBytes(): number {
    return this.#file.bytes;
  }
  word2 = (b: Buffer, at: number): number => (this.littleEndian ? b.readUInt16LE(at) : b.readUInt16BE(at));
  word4 = (b: Buffer, at: number): number => (this.littleEndian ? b.readUInt32LE(at) : b.readUInt32BE(at));
  word8 = (b: Buffer, at: number): number => Number(this.littleEndian ? b.readBigUInt64LE(at) : b.readBigUInt64BE(at));

  directory(offset: number, page: number): { tags: Map<number, Field>; following: number } {
    const [countBytes, entryBytes, linkBytes] = this.#big ? [8, 20, 8] : [2, 12, 4];
    const lead = this.#read(offset, countBytes, page);
    const count = this.#big ? this.word8(lead, 0) : this.word2(lead, 0);
    if (count > 4096) throw new ImageFileError(`a page directory of ${count} entries`, COPY_AGAIN, page);
    const body = this.#read(offset + countBytes, count * entryBytes + linkBytes, page);
    const tags = new Map<number, Field>();
    for (let i = 0; i < count; i++) {
      const at = i * entryBytes;
      const tag = this.word2(body, at);
      if (!WANTED.has(tag)) continue;
      const inlineAt = at + (this.#big ? 12 : 8);
      tags.set(tag, {
        type: this.word2(body, at + 2),
        count: this.#big ? this.word8(body, at + 4) : this.word4(body, at + 4),
        inline: body.subarray(inlineAt, inlineAt + linkBytes),
      });
    }
    const following = this.#big ? this.word8(body, count * entryBytes) : this.word4(body, count * entryBytes);
    return { tags, following };
  }

  /** Whole numbers of a field, at most `most` of them. */
  values(field: Field, most: number, page: number): number[] {
    const size = TYPE_BYTES[field.type];
    if (size === undefined || field.count > most) {
      throw new ImageFileError(
        `a page directory entry of ${field.count} values of type ${field.type}`,
        COPY_AGAIN,
        page,
      );
    }
    const bytes = size * field.count;
    const where = this.#big ? 8 : 4;
    const data =
      bytes <= where
        ? field.inline
        : this.#read(this.#big ? this.word8(field.inline, 0) : this.word4(field.inline, 0), bytes, page);
    const one = size === 1 ? (at: number) => data[at] : size === 2 ? (at: number) => this.word2(data, at) : null;
    const read = one ?? (size === 4 ? (at: number) => this.word4(data, at) : (at: number) => this.word8(data, at));
    return Array.from({ length: field.count }, (_, i) => read(i * size));
  }

  #read(offset: number, length: number, page: number): Buffer {
    try {
      return this.#file.read(offset, length);
    } catch (e) {
      if (e instanceof ImageFileError) throw new ImageFileError(e.message, e.fix, page, e);
      throw e;
    }
  }
}

function pageOf(tags: Map<number, Field>, reader: DirectoryReader, page: number): TiffPage {
  const number = (tag: number, otherwise: number): number => {
    const field = tags.get(tag);
    return field === undefined ? otherwise : (reader.values(field, 64, page)[0] ?? otherwise);
  };
  const rows = number(TAG.length, 0);
  const cols = number(TAG.width, 0);
  checkSize(rows, cols, page);
  const samples = number(TAG.samples, 1);
  if (samples !== 1 || number(TAG.photometric, 1) > 1) {
    throw new ImageFileError(
      samples === 1 ? "a colour picture" : `${samples} samples a pixel (a colour picture?); expected 1`,
      "export the measured values, one number a pixel, not the picture of them",
      page,
    );
  }
  const bits = number(TAG.bits, 1);
  const sampleFormat = number(TAG.sampleFormat, 1);
  const integer = (sampleFormat === 1 || sampleFormat === 2) && (bits === 8 || bits === 16 || bits === 32);
  const floating = sampleFormat === 3 && (bits === 16 || bits === 32 || bits === 64);
  if (!integer && !floating) {
    throw new ImageFileError(
      `${bits}-bit pixels of sample format ${sampleFormat}; expected 8, 16 or 32-bit integers or 16, 32 or 64-bit floats`,
      "save it as 32-bit float",
      page,
    );
  }
  const compression = number(TAG.compression, 1);
  if (!LOSSLESS.has(compression)) {
    throw new ImageFileError(
      `compressed with ${COMPRESSION_NAMES[compression] ?? `method ${compression}`}; none, LZW, deflate and PackBits are read`,
      "save it uncompressed",
      page,
    );
  }
  const predictor = number(TAG.predictor, 1);
  if (predictor < 1 || predictor > 3 || (predictor === 3 && !floating)) {
    throw new ImageFileError(`predictor ${predictor} on ${bits}-bit pixels`, "save it uncompressed", page);
  }
  const layout = blocks(tags, reader, rows, cols, page);
  const most = 1.6 * layout.blockRows * layout.blockCols * (bits / 8) + 4096;
  layout.offsets.forEach((offset, k) => {
    const length = layout.byteCounts[k];
    if (offset + length > reader.fileBytes) {
      throw new ImageFileError(
        `the file is cut off: ${reader.fileBytes} bytes, but this page's pixels reach to byte ${offset + length}`,
        "copy the file again from where it was measured",
        page,
      );
    }
    const wanted = expectedBytes(layout, rows, bits, k);
    if (length === 0 || length > most || (compression === 1 && length < wanted)) {
      throw new ImageFileError(`a strip or tile of ${length} bytes for ${wanted} bytes of pixels`, COPY_AGAIN, page);
    }
  });
  return {
    rows,
    cols,
    bits,
    sampleFormat,
    compression,
    predictor,
    littleEndian: reader.littleEndian,
    ...layout,
  };
}

type Layout = Pick<TiffPage, "tiled" | "blockRows" | "blockCols" | "offsets" | "byteCounts">;

function blocks(tags: Map<number, Field>, reader: DirectoryReader, rows: number, cols: number, page: number): Layout {
  const tiled = !tags.has(TAG.stripOffsets);
  const offsetField = tags.get(tiled ? TAG.tileOffsets : TAG.stripOffsets);
  const countField = tags.get(tiled ? TAG.tileByteCounts : TAG.stripByteCounts);
  const size = (tag: number, otherwise: number): number => {
    const field = tags.get(tag);
    return field === undefined ? otherwise : (reader.values(field, 1, page)[0] ?? otherwise);
  };
  const blockRows = tiled ? size(TAG.tileLength, 0) : Math.min(size(TAG.rowsPerStrip, rows), rows);
  const blockCols = tiled ? size(TAG.tileWidth, 0) : cols;
  if (offsetField === undefined || countField === undefined || blockRows < 1 || blockCols < 1) {
    throw new ImageFileError("it does not say where its pixels lie", COPY_AGAIN, page);
  }
  checkSize(blockRows, blockCols, page);
  if (blockRows * blockCols > Math.max(4 * rows * cols, 1 << 20)) {
    throw new ImageFileError(`tiles of ${blockCols} × ${blockRows} pixels for ${cols} × ${rows}`, COPY_AGAIN, page);
  }
  const expected = Math.ceil(rows / blockRows) * Math.ceil(cols / blockCols);
  const offsets = reader.values(offsetField, expected, page);
  const byteCounts = reader.values(countField, expected, page);
  if (offsets.length !== expected || byteCounts.length !== expected) {
    throw new ImageFileError(`${offsets.length} strips or tiles; its size asks for ${expected}`, COPY_AGAIN, page);
  }
  return { tiled, blockRows, blockCols, offsets, byteCounts };
}

/** Bytes of strip or tile `k` once decompressed: tiles are full, the last strip has only the rows that are left. */
function expectedBytes(layout: Layout, rows: number, bits: number, k: number): number {
  const blockRows = layout.tiled ? layout.blockRows : Math.min(layout.blockRows, rows - k * layout.blockRows);
  return (blockRows * layout.blockCols * bits) / 8;
}
