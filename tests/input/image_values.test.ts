import { execFileSync } from "node:child_process";
import { mkdtempSync, readdirSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { crc32 } from "node:zlib";
import { afterAll, describe, expect, test } from "vitest";
import { createTiff } from "../../src/demo/write_tiff.js";
import { ImageFileError } from "../../src/input/byte_file.js";
import { closeImages, withImage } from "../../src/input/image_file.js";

const FOLDER = join(import.meta.dirname, "../../fixtures/images");

interface ExpectedPage {
  crc32: number;
  corner: string;
  middle: string;
  nan: number;
}
interface ExpectedFile {
  rows: number;
  cols: number;
  pages: ExpectedPage[];
}
const expected = JSON.parse(readFileSync(join(FOLDER, "expected.json"), "utf8")) as {
  files: Record<string, ExpectedFile>;
};

const read = (name: string, page: number, scale = 1): Promise<Float32Array> =>
  withImage(join(FOLDER, name), (image) => image.read(page, scale));

/** CRC-32 over the values, every NaN as the one quiet NaN. */
function checksum(values: Float32Array): number {
  const bits = new Uint32Array(Float32Array.from(values).buffer);
  values.forEach((v, k) => {
    if (Number.isNaN(v)) bits[k] = 0x7fc00000;
  });
  return crc32(new Uint8Array(bits.buffer));
}

afterAll(closeImages);

describe("values as another program wrote them, to the bit", () => {
  test("there are fixtures of every kind", () => {
    expect(Object.keys(expected.files).length).toBeGreaterThan(60);
  });

  test.each(Object.keys(expected.files))("%s", async (name) => {
    const want = expected.files[name];
    const pages = await withImage(join(FOLDER, name), (image) => image.pages);
    expect(pages.map((p) => [p.rows, p.cols])).toEqual(want.pages.map(() => [want.rows, want.cols]));
    for (const [k, page] of want.pages.entries()) {
      const values = await read(name, k);
      expect(Math.fround(Number(page.corner === "inf" ? Infinity : page.corner))).toBe(values[1]);
      expect(values[Math.floor(want.rows / 2) * want.cols + Math.floor(want.cols / 3)]).toBe(
        Math.fround(Number(page.middle)),
      );
      expect(values.filter((v) => Number.isNaN(v))).toHaveLength(page.nan);
      expect(checksum(values)).toBe(page.crc32);
    }
  });
});

// geotiff shares no code with the reader. It is left out where it goes wrong: big-endian files of several strips or tiles, whose
// places it reads as little-endian. It cannot be loaded in a worker thread, where vitest runs this file (its own worker support
// takes the thread for one of its own), so it gets a process.
const geotiffFails = /colour|(tiles|lzw-f4|packbits-u2|predict.*)-be/;
const GEOTIFF = `
  import { fromFile } from "geotiff";
  const out = {};
  for (const file of process.argv.slice(1)) {
    const tiff = await fromFile(file);
    out[file] = [];
    for (let k = 0; k < (await tiff.getImageCount()); k++) {
      const values = await (await tiff.getImage(k)).readRasters({ interleave: true });
      out[file].push(Buffer.from(Float32Array.from(values).buffer).toString("base64"));
    }
    await tiff.close();
  }
  console.log(JSON.stringify(out));
`;
test("an independent library reads the same from every TIFF", async () => {
  const names = readdirSync(FOLDER).filter((f) => f.endsWith(".tif") && !geotiffFails.test(f));
  const files = names.map((n) => join(FOLDER, n));
  const options = { cwd: import.meta.dirname, encoding: "utf8", maxBuffer: 1 << 28 } as const;
  const text = execFileSync(process.execPath, ["--input-type=module", "-e", GEOTIFF, ...files], options);
  const other = JSON.parse(text) as Record<string, string[]>;
  for (const [k, name] of names.entries()) {
    const pages = other[files[k]];
    expect(pages.length).toBeGreaterThan(0);
    for (const [page, packed] of pages.entries()) {
      const bytes = Uint8Array.from(Buffer.from(packed, "base64"));
      expect([name, page, await read(name, page)]).toEqual([name, page, new Float32Array(bytes.buffer)]);
    }
  }
});

test("a scale is applied in double precision and rounded once", async () => {
  const [plain, scaled] = [await read("npy-le-f8.npy", 0), await read("npy-le-f8.npy", 0, 1e9)];
  const direct = await read("plain-f4-le.tif", 0, Math.PI / 180);
  const values = await read("plain-f4-le.tif", 0);
  let further = 0;
  plain.forEach((v, k) => {
    // Twice rounded would be off by up to one more half step: the once-rounded value must not always be the twice-rounded one.
    if (Number.isFinite(v) && Math.fround(v * 1e9) !== scaled[k]) further++;
  });
  expect(further).toBeGreaterThan(50);
  values.forEach((v, k) => {
    expect(direct[k]).toBe(Math.fround(v * (Math.PI / 180)));
  });
});

test("stacks written by the demo's own writer come back to the bit", async () => {
  const folder = mkdtempSync(join(tmpdir(), "coldseam-"));
  try {
    const file = join(folder, "stack.tif");
    const pages = [0, 1, 2].map((k) =>
      Float32Array.from({ length: 200 * 130 }, (_, i) => (i % 97 === 0 ? NaN : Math.sin(i + k))),
    );
    const writer = createTiff(file);
    for (const p of pages) writer.addPage(p, 200, 130);
    writer.close();
    for (const [k, p] of pages.entries()) {
      expect(await withImage(file, (image) => image.read(k, 1))).toEqual(p);
    }
  } finally {
    await closeImages();
    rmSync(folder, { recursive: true });
  }
});

describe("what is not an image of measured values is refused with words", () => {
  test.each([
    ["colour.tif", /3 samples a pixel/, /measured values/],
    ["npy-complex.npy", /complex numbers/, /`signal`: it gives amplitude and phase/],
    ["npy-record.npy", /type record/, /float32/],
    ["npy-object.npy", /type "\|O"/, /float32/],
    ["npy-line.npy", /shape \(16\)/, /shapes/],
    ["expected.json", /text that begins with "\{/, /TIFF/],
    ["absent.tif", /no such file/, /check the name/],
    [".", /not a file/, /name of a file/],
  ])("%s", async (name, problem, fix) => {
    const words = await read(name, 0).then(
      () => ["no error", ""],
      (e: unknown) => (e instanceof ImageFileError ? [e.message, e.fix] : ["another error", String(e)]),
    );
    expect(words).toEqual([expect.stringMatching(problem), expect.stringMatching(fix)]);
  });
});
