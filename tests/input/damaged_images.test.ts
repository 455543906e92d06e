import { mkdtempSync, readFileSync, rmSync, utimesSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import zlib, { deflateSync } from "node:zlib";
import { afterAll, describe, expect, test } from "vitest";
import { ImageFileError } from "../../src/input/byte_file.js";
import { closeImages, withImage } from "../../src/input/image_file.js";
import { makeRandom } from "../../src/numerics/random.js";

const FIXTURES = join(import.meta.dirname, "../../fixtures/images");
const folder = mkdtempSync(join(tmpdir(), "coldseam-damaged-"));
afterAll(async () => {
  await closeImages();
  rmSync(folder, { recursive: true });
});

const fixture = (name: string): Buffer => readFileSync(join(FIXTURES, name));

/** Pixels of all pages, or the error in the user's words; any other error is thrown on. */
async function readAll(bytes: Uint8Array, name = "image"): Promise<Float32Array[] | ImageFileError> {
  const file = join(folder, name);
  writeFileSync(file, bytes);
  clock += 1;
  utimesSync(file, clock, clock); // another file each time, also where the length stays the same
  try {
    return await withImage(file, async (image) => {
      const out: Float32Array[] = [];
      for (const k of image.pages.keys()) out.push(await image.read(k, 1));
      return out;
    });
  } catch (e) {
    if (e instanceof ImageFileError) return e;
    throw e;
  }
}
let clock = 1_000_000;

async function errorOf(bytes: Uint8Array): Promise<ImageFileError> {
  const got = await readAll(bytes);
  if (!(got instanceof ImageFileError)) throw new Error("expected an ImageFileError, got pixels");
  return got;
}

/** A little-endian TIFF of one page with these directory entries; the pixels lie at byte 8. */
function tiff(
  entries: readonly (readonly [tag: number, type: number, count: number, value: number])[],
  pixels: Uint8Array,
): Buffer {
  const directory = Buffer.alloc(2 + 12 * entries.length + 4);
  directory.writeUInt16LE(entries.length, 0);
  entries.forEach(([tag, type, count, value], k) => {
    directory.writeUInt16LE(tag, 2 + 12 * k);
    directory.writeUInt16LE(type, 4 + 12 * k);
    directory.writeUInt32LE(count, 6 + 12 * k);
    directory.writeUInt32LE(value, 10 + 12 * k);
  });
  const head = Buffer.from("II*\0\0\0\0\0", "latin1");
  head.writeUInt32LE(8 + pixels.length, 4);
  return Buffer.concat([head, pixels, directory]);
}

const page = (change: Record<number, number>, bytes: number): (readonly [number, number, number, number])[] =>
  Object.entries({
    256: 4,
    257: 4,
    258: 32,
    259: 1,
    262: 1,
    273: 8,
    277: 1,
    278: 4,
    279: bytes,
    339: 3,
    ...change,
  }).map(([tag, value]) => [Number(tag), 4, 1, value]);

describe("a file that is cut off", () => {
  test.each([
    "stack-f4.tif",
    "stack-big-f4.tif",
    "tiles-f4.tif",
    "deflate-f4.tif",
    "lzw-f4-be.tif",
    "npy-stack.npy",
    "npy-fortran.npy",
  ])("%s is never read as zeros, wherever it ends", async (name) => {
    const whole = fixture(name);
    expect(await readAll(whole)).not.toBeInstanceOf(ImageFileError);
    const ends = new Set([0, 1, 2, 4, 7, 8, 9, 16, whole.length - 1, whole.length - 4]);
    for (let k = 0; k < whole.length; k += Math.ceil(whole.length / 40)) ends.add(k);
    for (const end of ends) {
      const error = await errorOf(whole.subarray(0, end));
      expect(error.message).toMatch(/cut off|empty|at least 8|neither a TIFF|damaged|text that begins/);
    }
  });

  test("the page is named", async () => {
    const whole = fixture("stack-f4.tif");
    const error = await errorOf(whole.subarray(0, whole.length - 4));
    expect(error.page).toBe(4);
    expect(error.message).toMatch(/^the file is cut off: \d+ bytes, but this page's pixels reach to byte \d+$/);
  });

  test("an array with more behind it is not what its header says", async () => {
    const error = await errorOf(Buffer.concat([fixture("npy-le-f4.npy"), Buffer.from([0])]));
    expect(error.message).toMatch(/goes on behind its data/);
  });
});

describe("hostile headers are refused before memory is taken", () => {
  const pixels = new Uint8Array(64);
  test("the page they are made from is sound", async () => {
    expect(await readAll(tiff(page({}, 64), pixels))).toEqual([new Float32Array(16)]);
  });

  test.each([
    ["absurd width", { 256: 200_000 }, /200000 × 4 pixels; at most 16384 a side/],
    ["absurd area", { 256: 16_384, 257: 16_384, 278: 16_384 }, /67108864 in all/],
    ["no pixels", { 256: 0 }, /0 × 4 pixels/],
    ["pixels beyond the file", { 273: 4_000_000_000 }, /cut off/],
    ["more strips than listed", { 278: 1 }, /1 strips or tiles; its size asks for 4/],
    ["no lossless compression", { 259: 7 }, /compressed with JPEG/],
    ["unknown pixels", { 258: 12, 339: 1 }, /12-bit pixels/],
    ["complex pixels", { 258: 64, 339: 6 }, /sample format 6/],
    ["a colour map", { 258: 8, 262: 3, 339: 1 }, /colour picture/],
    ["unknown predictor", { 317: 9 }, /predictor 9/],
    ["too few bytes", { 279: 60 }, /60 bytes for 64 bytes/],
  ])("%s", async (_, change, message) => {
    expect((await errorOf(tiff(page(change, 64), pixels))).message).toMatch(message);
  });

  test("ZSTD is unpacked where this Node.js can, and otherwise said with what to do", async () => {
    const image = Float32Array.from({ length: 16 }, (_, k) => k / 4);
    const pack: unknown = Reflect.get(zlib, "zstdCompressSync");
    if (typeof pack === "function") {
      const packed = pack(new Uint8Array(image.buffer)) as Uint8Array;
      expect(await readAll(tiff(page({ 259: 50000, 279: packed.length }, 0), packed))).toEqual([image]);
      return;
    }
    const error = await errorOf(tiff(page({ 259: 50000 }, 64), pixels));
    expect(error.message).toMatch(/compressed with ZSTD, which this Node\.js \(v\d+.*\) cannot unpack/);
    expect(error.fix).toBe("save it uncompressed, or run the program with Node.js 22.15 or later");
  });

  test("a count of four thousand million strips", async () => {
    const entries = page({}, 64).map(
      ([tag, type, count, value]) => [tag, type, tag === 273 ? 4_000_000_000 : count, value] as const,
    );
    expect((await errorOf(tiff(entries, pixels))).message).toMatch(/4000000000 values/);
  });

  test("pages that lead back to the first", async () => {
    const bytes = tiff(page({}, 64), pixels);
    bytes.writeUInt32LE(bytes.readUInt32LE(4), bytes.length - 4);
    expect((await errorOf(bytes)).message).toMatch(/lead back/);
  });

  test.each([
    ["deflate", 8, deflateSync(new Uint8Array(1 << 26), { level: 9 })],
    ["PackBits", 32773, Uint8Array.from({ length: 4096 }, (_, k) => (k % 2 === 0 ? 129 : 7))],
  ])("a %s bomb", async (_, compression, bomb) => {
    const before = process.memoryUsage().arrayBuffers;
    const small = bomb.subarray(0, 4000);
    const got = await readAll(tiff(page({ 259: compression, 279: small.length }, 0), small));
    if (got instanceof ImageFileError) expect(got.message).toMatch(/unpack/);
    else expect(got[0]).toHaveLength(16);
    expect(process.memoryUsage().arrayBuffers - before).toBeLessThan(1 << 20);
    if (bomb.length > 5000) {
      const whole = await errorOf(tiff(page({ 259: compression, 279: bomb.length }, 0), bomb));
      expect(whole.message).toMatch(/a strip or tile of \d+ bytes for 64 bytes of pixels/);
    }
  });

  test("an array of a million rows", async () => {
    const header = "{'descr': '<f4', 'fortran_order': False, 'shape': (1000000, 1000000), }\n";
    const bytes = Buffer.concat([
      Buffer.from("\x93NUMPY\x01\0", "latin1"),
      Buffer.from([header.length, 0]),
      Buffer.from(header),
    ]);
    expect((await errorOf(bytes)).message).toMatch(/1000000 × 1000000 pixels/);
  });
});

test("damaged compressed data are said to be damaged", async () => {
  for (const name of ["deflate-f4.tif", "lzw-f4-le.tif"]) {
    const whole = fixture(name);
    const bytes = Buffer.from(whole);
    bytes.fill(0xff, 40, 400); // inside the first strips
    const got = await readAll(bytes);
    expect(got).toBeInstanceOf(ImageFileError);
  }
});

test("a file that changes between two readings is read afresh", async () => {
  const first = await readAll(tiff(page({}, 64), new Uint8Array(64)), "changing");
  const other = await readAll(
    tiff(page({}, 64), new Uint8Array(Float32Array.from({ length: 16 }, () => 3).buffer)),
    "changing",
  );
  expect(first).toEqual([new Float32Array(16)]);
  expect(other).toEqual([new Float32Array(16).fill(3)]);
});

test("300 files with bytes changed at random: pixels or an error in words, nothing else, and soon", async () => {
  const random = makeRandom(20240517);
  const below = (n: number): number => random.below(n);
  const names = [
    "stack-f4.tif",
    "tiles-f4.tif",
    "deflate-f4.tif",
    "lzw-f4-be.tif",
    "stack-big-f4.tif",
    "npy-stack.npy",
  ];
  let refused = 0;
  for (let k = 0; k < 300; k++) {
    const bytes = Buffer.from(fixture(names[k % names.length]));
    // Most changes go where the structure is: the first bytes, and a TIFF's directories wherever they are.
    for (let n = 1 + below(6); n > 0; n--) {
      const at = below(3) > 0 ? below(Math.min(700, bytes.length)) : below(bytes.length);
      bytes[at] = [0, 255, 1, below(256)][below(4)];
    }
    const start = performance.now();
    const got = await readAll(bytes);
    expect(performance.now() - start).toBeLessThan(2000);
    if (got instanceof ImageFileError) {
      refused++;
      expect(got.message.length).toBeGreaterThan(5);
      expect(got.fix.length).toBeGreaterThan(5);
    } else expect(got.length).toBeGreaterThan(0);
  }
  expect(refused).toBeGreaterThan(33);
});
