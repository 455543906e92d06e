import { closeSync, openSync, writeSync } from "node:fs";
import { endianness } from "node:os";

/** Writes a stack of float32 images as one uncompressed TIFF, a page at a time (TIFF 6.0, strips, sample format 3). */
export interface TiffWriter {
  /** Appends a page, row-major. Throws RangeError on a wrong length, or where the file would pass 4 GiB. */
  addPage(data: Float32Array, rows: number, cols: number): void;
  close(): void;
}

const LITTLE = endianness() === "LE";
const SHORT = 3;
const LONG = 4;
const STRIP_BYTES = 65536;

export function createTiff(file: string): TiffWriter {
  const fd = openSync(file, "w");
  const header = new DataView(new ArrayBuffer(8));
  header.setUint16(0, LITTLE ? 0x4949 : 0x4d4d);
  header.setUint16(2, 42, LITTLE);
  writeSync(fd, new Uint8Array(header.buffer), 0, 8, 0);
  let end = 8;
  /** Where the offset of the next directory has to be written: the header's field, then each directory's last. */
  let linkAt = 4;
  return {
    addPage(data, rows, cols) {
      if (data.length !== rows * cols) throw new RangeError(`${data.length} values for ${rows} × ${cols} pixels`);
      const rowsPerStrip = Math.max(1, Math.floor(STRIP_BYTES / (4 * cols)));
      const strips = Math.ceil(rows / rowsPerStrip);
      const offsets = Array.from({ length: strips }, (_, s) => end + 4 * s * rowsPerStrip * cols);
      const counts = Array.from(
        { length: strips },
        (_, s) => 4 * cols * Math.min(rowsPerStrip, rows - s * rowsPerStrip),
      );
      const directoryAt = end + data.byteLength + (end % 2);
      const tags: [tag: number, type: number, values: number[]][] = [
        [256, LONG, [cols]],
        [257, LONG, [rows]],
        [258, SHORT, [32]],
        [259, SHORT, [1]],
        [262, SHORT, [1]], // black is zero
        [273, LONG, offsets],
        [277, SHORT, [1]],
        [278, LONG, [rowsPerStrip]],
        [279, LONG, counts],
        [339, SHORT, [3]], // IEEE floating point
      ];
      const tableBytes = 2 + 12 * tags.length + 4;
      const size = tableBytes + (strips > 1 ? 8 * strips : 0);
      if (directoryAt + size > 0xffffffff)
        throw new RangeError("a TIFF file cannot pass 4 GiB: write fewer pages a file");
      const view = new DataView(new ArrayBuffer(size));
      view.setUint16(0, tags.length, LITTLE);
      let listAt = tableBytes;
      tags.forEach(([tag, type, values], t) => {
        const at = 2 + 12 * t;
        view.setUint16(at, tag, LITTLE);
        view.setUint16(at + 2, type, LITTLE);
        view.setUint32(at + 4, values.length, LITTLE);
        if (values.length > 1) {
          view.setUint32(at + 8, directoryAt + listAt, LITTLE);
          for (const v of values) {
            view.setUint32(listAt, v, LITTLE);
            listAt += 4;
          }
        } else if (type === SHORT) view.setUint16(at + 8, values[0], LITTLE);
        else view.setUint32(at + 8, values[0], LITTLE);
      });
      writeSync(fd, new Uint8Array(data.buffer, data.byteOffset, data.byteLength), 0, data.byteLength, end);
      writeSync(fd, new Uint8Array(view.buffer), 0, size, directoryAt);
      const link = new DataView(new ArrayBuffer(4));
      link.setUint32(0, directoryAt, LITTLE);
      writeSync(fd, new Uint8Array(link.buffer), 0, 4, linkAt);
      linkAt = directoryAt + tableBytes - 4;
      end = directoryAt + size;
    },
    close: () => closeSync(fd),
  };
}
