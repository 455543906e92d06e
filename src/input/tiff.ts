import { ByteFile, ImageFileError } from "./byte_file.js";
import { choosePlane, type OpenImage } from "./image_types.js";
import { omePixelSize } from "./ome.js";
import { copyPixels, typeName, type PixelType } from "./pixel_values.js";
import { decompress, unpredict } from "./tiff_decode.js";
import { readTiffPages, type TiffPage } from "./tiff_header.js";

/**
 * Opens a TIFF or BigTIFF: any number of pages, strips or tiles, both byte orders, 8, 16 and 32-bit integers with and without sign,
 * 16, 32 and 64-bit floats, one or several samples a pixel, side by side or in planes; uncompressed, LZW, deflate, PackBits or (where Node has it) ZSTD, with any predictor. The physical size of OME-XML is a claim. Values come as
 * stored (white-is-zero too), NaN and infinities included. Throws ImageFileError on everything else and on a file that is cut off.
 */
export function openTiff(path: string): OpenImage {
  const file = new ByteFile(path);
  try {
    const { pages, description } = readTiffPages(file);
    const shapes = pages.map((p) => ({
      rows: p.rows,
      cols: p.cols,
      type: typeName(pixelType(p)),
      planes: p.samples,
      complex: false,
    }));
    return {
      format: "tiff",
      pages: shapes,
      claims: { pixel: omePixelSize(description), temperaturesK: null },
      read: (page, scale, plane) =>
        Promise.resolve().then(() => {
          const p = pages[page];
          const shape = shapes[page];
          if (p === undefined || shape === undefined) {
            throw new ImageFileError(`no such page; the file has ${pages.length}`, "give a page it has", page);
          }
          return readPage(file, p, page, scale, choosePlane(shape, plane, page));
        }),
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

function readPage(file: ByteFile, page: TiffPage, index: number, scale: number, plane: number): Float32Array {
  const { rows, cols, blockRows, blockCols } = page;
  const type = pixelType(page);
  const across = Math.ceil(cols / blockCols);
  // Several values a pixel lie side by side in one strip or tile, or each in its own.
  const step = page.planar ? 1 : page.samples;
  const first = page.planar ? plane * page.perPlane : 0;
  const start = page.planar ? 0 : plane;
  const rowValues = blockCols * step;
  const most = blockRows * rowValues * type.bytes;
  const out = new Float32Array(rows * cols);
  for (let k = 0; k < page.perPlane; k++) {
    const row0 = Math.floor(k / across) * blockRows;
    const col0 = (k % across) * blockCols;
    const here = Math.min(blockRows, rows - row0);
    const least = page.tiled ? most : here * rowValues * type.bytes;
    const packed = new Uint8Array(file.readAligned(page.offsets[first + k], page.byteCounts[first + k]));
    const data = withPage(index, () => decompress(packed, page.compression, least, most));
    const bigEndian = unpredict(data, page.predictor, here, rowValues, type.bytes, page.littleEndian, step);
    const stored: PixelType = { ...type, littleEndian: !bigEndian };
    const width = Math.min(blockCols, cols - col0);
    if (width === cols && blockCols === cols) {
      copyPixels(data, stored, { start, step }, scale, out, { start: row0 * cols, step: 1 }, here * cols);
      continue;
    }
    for (let i = 0; i < here; i++) {
      const to = { start: (row0 + i) * cols + col0, step: 1 };
      copyPixels(data, stored, { start: start + i * rowValues, step }, scale, out, to, width);
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
