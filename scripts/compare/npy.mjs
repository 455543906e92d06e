// Arrays for NumPy: one .npy file an array, version 1.0 of the format, little-endian, row-major.
import { writeFileSync } from "node:fs";

const TYPES = new Map([
  [Float32Array, "<f4"],
  [Float64Array, "<f8"],
  [Uint8Array, "|u1"],
]);

export function writeNpy(file, data, shape) {
  const type = TYPES.get(data.constructor);
  if (type === undefined) throw new TypeError(`${file}: no .npy type for ${data.constructor.name}`);
  const text = `{'descr': '${type}', 'fortran_order': False, 'shape': (${shape.join(", ")},), }`;
  const header = text.padEnd(Math.ceil((text.length + 11) / 64) * 64 - 11) + "\n";
  const start = Buffer.from([0x93, 0x4e, 0x55, 0x4d, 0x50, 0x59, 1, 0, header.length & 255, header.length >> 8]);
  writeFileSync(
    file,
    Buffer.concat([start, Buffer.from(header, "latin1"), Buffer.from(data.buffer, data.byteOffset, data.byteLength)]),
  );
}
