import { ByteFile, ImageFileError } from "./byte_file.js";
import type { OpenImage } from "./image_types.js";
import { copyPixels, typeName, type PixelType } from "./pixel_values.js";
import { decompress, unpredict } from "./tiff_decode.js";
import { readTiffPages, type TiffPage } from "./tiff_header.js";

/**
 * Opens a TIFF or BigTIFF: any number of pages, strips or tiles, both byte orders, 8, 16 and 32-bit integers with and without sign,
 * 16, 32 and 64-bit floats, one sample a pixel; uncompressed, LZW, deflate or PackBits, with any predictor. Values come as
 * stored (white-is-zero too), NaN and infinities included. Throws ImageFileError on everything else and on a file that is cut off.
 */
export function openTiff(path: string): OpenImage {
  const file = new ByteFile(path);
  try {
    const pages = readTiffPages(file);
    return {
      format: "tiff",
      pages: pages.map((p) => ({ rows: p.rows, cols: p.cols, type: typeName(pixelType(p)) })),
      read: (page, scale) => Promise.resolve().then(() => readPage(file, pages, page, scale)),
      close: () => Promise.resolve(file.close()),
    };
  } catch (e) {
    file.close();
    throw e;
  }
}

const pixelType = (p: TiffPage): PixelType => ({
  kind: p.sampleFormat === 3 ? "f" : p.sampleFormat === 2 ? "i" : "u",
  bytes: p.bits / 8,
  littleEndian: p.littleEndian,
});

function readPage(file: ByteFile, pages: readonly TiffPage[], index: number, scale: number): Float32Array {
  const page = pages[index];
  if (page === undefined)
    throw new ImageFileError(`no such page; the file has ${pages.length}`, "give a page it has", index);
  const { rows, cols, blockRows, blockCols } = page;
  const type = pixelType(page);
  const across = Math.ceil(cols / blockCols);
  const most = blockRows * blockCols * type.bytes;
  const out = new Float32Array(rows * cols);
  for (let k = 0; k < page.offsets.length; k++) {
    const row0 = Math.floor(k / across) * blockRows;
    const col0 = (k % across) * blockCols;
    const here = Math.min(blockRows, rows - row0);
    const least = page.tiled ? most : here * blockCols * type.bytes;
    const packed = new Uint8Array(file.readAligned(page.offsets[k], page.byteCounts[k]));
    const data = withPage(index, () => decompress(packed, page.compression, least, most));
    const bigEndian = unpredict(data, page.predictor, here, blockCols, type.bytes, page.littleEndian);
    const stored: PixelType = { ...type, littleEndian: !bigEndian };
    const width = Math.min(blockCols, cols - col0);
    if (width === cols && blockCols === cols) {
      copyPixels(data, stored, { start: 0, step: 1 }, scale, out, { start: row0 * cols, step: 1 }, here * cols);
      continue;
    }
    for (let i = 0; i < here; i++) {
      const to = { start: (row0 + i) * cols + col0, step: 1 };
      copyPixels(data, stored, { start: i * blockCols, step: 1 }, scale, out, to, width);
    }
  }
  return out;
}

/** Adds the page to what is said of a strip or tile. */
function withPage<T>(page: number, f: () => T): T {
  try {
    return f();
  } catch (e) {
    if (e instanceof ImageFileError && e.page === null) throw new ImageFileError(e.message, e.fix, page, e);
    throw e;
  }
}
