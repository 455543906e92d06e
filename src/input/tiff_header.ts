import { type ByteFile, ImageFileError } from "./byte_file.js";
import { checkSize, MAX_PAGES } from "./image_types.js";
import { canUnpackZstd, ZSTD } from "./tiff_decode.js";
import { COPY_AGAIN, DirectoryReader, type Field } from "./tiff_directory.js";

/** Layout of one page, checked against the file's length: every strip or tile lies inside the file. */
export interface TiffPage {
  readonly rows: number;
  readonly cols: number;
  /** Values a pixel; `planar`: each in strips or tiles of its own, one after the other. */
  readonly samples: number;
  readonly planar: boolean;
  readonly bits: number;
  /** 1 unsigned, 2 signed, 3 floating point. */
  readonly sampleFormat: 1 | 2 | 3;
  readonly compression: number;
  readonly predictor: number;
  readonly littleEndian: boolean;
  readonly tiled: boolean;
  /** Strips or tiles of one plane. */
  readonly perPlane: number;
  /** Size of a tile; of a strip, as wide as the image. */
  readonly blockRows: number;
  readonly blockCols: number;
  /** Byte offset and length of each strip or tile, in reading order. */
  readonly offsets: readonly number[];
  readonly byteCounts: readonly number[];
}

const TAG = {
  width: 256,
  length: 257,
  bits: 258,
  compression: 259,
  photometric: 262,
  description: 270,
  stripOffsets: 273,
  samples: 277,
  rowsPerStrip: 278,
  stripByteCounts: 279,
  planar: 284,
  predictor: 317,
  tileWidth: 322,
  tileLength: 323,
  tileOffsets: 324,
  tileByteCounts: 325,
  sampleFormat: 339,
} as const;
/** The XML that describes a long stack runs to hundreds of kilobytes; longer ones are left alone. */
const MAX_DESCRIPTION = 4 << 20;
const MAX_SAMPLES = 64;
/** As many as the largest image of one sample has. */
const MAX_BLOCK_VALUES = 2 ** 26;
const WANTED = new Set<number>(Object.values(TAG));

/** Compressions that keep every bit and whose size is known before memory is taken: none, LZW, deflate (both numbers), PackBits, ZSTD. */
const LOSSLESS = new Set([1, 5, 8, 32946, 32773, ZSTD]);
const COMPRESSION_NAMES: Readonly<Record<number, string>> = {
  2: "CCITT fax",
  3: "CCITT fax",
  4: "CCITT fax",
  6: "JPEG (which changes values)",
  7: "JPEG (which changes values)",
  34712: "JPEG 2000",
  34887: "LERC",
  34925: "LZMA",
  50001: "WebP",
};

/**
 * The pages of a TIFF or BigTIFF file, from its directories alone. A cut-off file, a ring of directories, counts and sizes that no
 * scan has are refused here, before any pixel is read or memory taken.
 * `description` is the text of the first page, "" where there is none. Throws ImageFileError. Source: TIFF Revision 6.0 (Aldus, 1992) and the BigTIFF design.
 */
export function readTiffPages(file: ByteFile): { readonly pages: readonly TiffPage[]; readonly description: string } {
  if (file.bytes < 8) throw new ImageFileError(`${file.bytes} bytes; a TIFF has at least 8`, COPY_AGAIN);
  const lead = file.read(0, Math.min(16, file.bytes));
  const le = lead[0] === 0x49;
  const big = (le ? lead.readUInt16LE(2) : lead.readUInt16BE(2)) === 43;
  if (big && lead.length < 16) throw new ImageFileError("the file is cut off inside its header", COPY_AGAIN);
  const reader = new DirectoryReader(file, le, big, WANTED);
  let next = big ? reader.word8(lead, 8) : reader.word4(lead, 4);
  const pages: TiffPage[] = [];
  let description = "";
  const seen = new Set<number>();
  while (next !== 0) {
    if (seen.has(next)) throw new ImageFileError("its pages lead back to an earlier page", COPY_AGAIN, pages.length);
    if (pages.length === MAX_PAGES) throw new ImageFileError(`more than ${MAX_PAGES} pages`, "split the stack");
    seen.add(next);
    const { tags, following } = reader.directory(next, pages.length);
    if (pages.length === 0) description = reader.text(tags.get(TAG.description), MAX_DESCRIPTION, 0);
    pages.push(pageOf(tags, reader, pages.length));
    next = following;
  }
  if (pages.length === 0) throw new ImageFileError("no page in it", COPY_AGAIN);
  return { pages, description };
}

function pageOf(tags: Map<number, Field>, reader: DirectoryReader, page: number): TiffPage {
  const number = (tag: number, otherwise: number): number => {
    const field = tags.get(tag);
    return field === undefined ? otherwise : (reader.values(field, 64, page)[0] ?? otherwise);
  };
  /** The one value that all samples have. */
  const same = (field: Field | undefined, otherwise: number): number => {
    const values = field === undefined ? [otherwise] : reader.values(field, MAX_SAMPLES, page);
    if (values.every((v) => v === values[0])) return values[0] ?? otherwise;
    throw new ImageFileError(`samples of ${values.join(", ")} bits or kinds`, "save all as one type", page);
  };
  const rows = number(TAG.length, 0);
  const cols = number(TAG.width, 0);
  checkSize(rows, cols, page);
  const samples = number(TAG.samples, 1);
  const photometric = number(TAG.photometric, 1);
  // 0 and 1 are grey, 2 the three colours: measured channels are often saved as such, and whoever names one gets its values.
  if (photometric > 2 || (photometric === 2 && samples < 3)) {
    throw new ImageFileError("a colour picture", "export the measured values, not the picture of them", page);
  }
  if (samples < 1 || samples > MAX_SAMPLES) {
    throw new ImageFileError(`${samples} samples a pixel; at most ${MAX_SAMPLES} are read`, COPY_AGAIN, page);
  }
  const planar = samples > 1 && number(TAG.planar, 1) === 2;
  const bits = same(tags.get(TAG.bits), 1);
  const sampleFormat = same(tags.get(TAG.sampleFormat), 1);
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
      `compressed with ${COMPRESSION_NAMES[compression] ?? `method ${compression}`}; none, LZW, deflate, PackBits and ZSTD are read`,
      "save it uncompressed",
      page,
    );
  }
  if (compression === ZSTD && !canUnpackZstd) {
    throw new ImageFileError(
      `compressed with ZSTD, which this Node.js (${process.version}) cannot unpack`,
      "save it uncompressed, or run the program with Node.js 22.15 or later",
      page,
    );
  }
  const predictor = number(TAG.predictor, 1);
  if (predictor < 1 || predictor > 3 || (predictor === 3 && !floating)) {
    throw new ImageFileError(`predictor ${predictor} on ${bits}-bit pixels`, "save it uncompressed", page);
  }
  const layout = blocks(tags, reader, rows, cols, planar ? samples : 1, page);
  const valuesAPixel = planar ? 1 : samples;
  if (layout.blockRows * layout.blockCols * valuesAPixel > MAX_BLOCK_VALUES) {
    throw new ImageFileError(
      `strips or tiles of ${layout.blockCols} × ${layout.blockRows} pixels of ${samples} samples`,
      "save it in smaller strips, or one channel a page",
      page,
    );
  }
  const most = 1.6 * layout.blockRows * layout.blockCols * valuesAPixel * (bits / 8) + 4096;
  layout.offsets.forEach((offset, k) => {
    const length = layout.byteCounts[k];
    if (offset + length > reader.fileBytes) {
      throw new ImageFileError(
        `the file is cut off: ${reader.fileBytes} bytes, but this page's pixels reach to byte ${offset + length}`,
        "copy the file again from where it was measured",
        page,
      );
    }
    const wanted = expectedBytes(layout, rows, bits * valuesAPixel, k % layout.perPlane);
    if (length === 0 || length > most || (compression === 1 && length < wanted)) {
      throw new ImageFileError(`a strip or tile of ${length} bytes for ${wanted} bytes of pixels`, COPY_AGAIN, page);
    }
  });
  return {
    rows,
    cols,
    samples,
    planar,
    bits,
    sampleFormat,
    compression,
    predictor,
    littleEndian: reader.littleEndian,
    ...layout,
  };
}

type Layout = Pick<TiffPage, "tiled" | "perPlane" | "blockRows" | "blockCols" | "offsets" | "byteCounts">;

function blocks(
  tags: Map<number, Field>,
  reader: DirectoryReader,
  rows: number,
  cols: number,
  planes: number,
  page: number,
): Layout {
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
  const perPlane = Math.ceil(rows / blockRows) * Math.ceil(cols / blockCols);
  const expected = planes * perPlane;
  const offsets = reader.values(offsetField, expected, page);
  const byteCounts = reader.values(countField, expected, page);
  if (offsets.length !== expected || byteCounts.length !== expected) {
    throw new ImageFileError(`${offsets.length} strips or tiles; its size asks for ${expected}`, COPY_AGAIN, page);
  }
  return { tiled, perPlane, blockRows, blockCols, offsets, byteCounts };
}

/** Bytes of strip or tile `k` of a plane once decompressed: tiles are full, the last strip has only the rows that are left. */
function expectedBytes(layout: Layout, rows: number, bits: number, k: number): number {
  const blockRows = layout.tiled ? layout.blockRows : Math.min(layout.blockRows, rows - k * layout.blockRows);
  return (blockRows * layout.blockCols * bits) / 8;
}
