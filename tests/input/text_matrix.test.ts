import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { gzipSync } from "node:zlib";
import * as fc from "fast-check";
import { afterAll, describe, expect, test } from "vitest";
import { ImageFileError } from "../../src/input/byte_file.js";
import { closeImages, withImage } from "../../src/input/image_file.js";
import { readText } from "../../src/input/text_matrix.js";

const folder = mkdtempSync(join(tmpdir(), "coldseam-text-"));
afterAll(async () => {
  await closeImages();
  rmSync(folder, { recursive: true });
});

let n = 0;
interface Matrix {
  rows: number;
  cols: number;
  values: number[];
}
async function read(content: string | Uint8Array, scale = 1): Promise<Matrix> {
  const file = join(folder, `m${n++}.txt`);
  writeFileSync(file, content);
  return withImage(file, async (image) => {
    expect([image.format, image.pages.length]).toEqual(["text", 1]);
    const { rows, cols } = image.pages[0] ?? { rows: 0, cols: 0 };
    return { rows, cols, values: [...(await image.read(0, scale))] };
  });
}
async function errorOf(content: string | Uint8Array): Promise<string> {
  try {
    await read(content);
  } catch (e) {
    if (e instanceof ImageFileError) return `${e.message} | ${e.fix}`;
    throw e;
  }
  throw new Error("it was read");
}

const EXPECTED = { rows: 2, cols: 3, values: [1, -2.5, NaN, 4e3, 0.5, 6] };
test.each([
  ["commas", "1,-2.5,nan\n4e3,.5,6\n"],
  ["a missing value", "1,-2.5,\n4e3,.5,6"],
  ["tabs", "1\t-2.5\t\n4e3\t.5\t6\n"],
  ["semicolons with blanks", "1 ; -2.5 ; --\r\n4e3 ; .5 ; 6\r\n"],
  ["blanks", "   1  -2.5   NaN\n 4d3   .5     6.\n\n\n"],
  ["comments and a byte-order mark", "\ufeff# a scan\n% 10 nm\n1,-2.5,NA\n# half way\n4e3,.5,6\n"],
])("%s", async (_, text) => {
  expect(await read(text)).toEqual(EXPECTED);
  expect(await read(gzipSync(text))).toEqual(EXPECTED);
});

test("a scale is applied in double precision; rows of pixels that were not measured are rows", async () => {
  expect((await read("0.1,0.2\n,\n3,4", 1e9)).values).toEqual([
    Math.fround(0.1 * 1e9),
    Math.fround(0.2 * 1e9),
    NaN,
    NaN,
    3e9,
    4e9,
  ]);
});

test("any matrix comes back to the bit, with any separator", async () => {
  const value = fc.oneof(fc.float({ noDefaultInfinity: true }), fc.integer({ min: -1000, max: 1000 }).map(Math.fround));
  const matrix = fc
    .integer({ min: 1, max: 7 })
    .chain((cols) => fc.array(fc.array(value, { minLength: cols, maxLength: cols }), { minLength: 1, maxLength: 7 }));
  await fc.assert(
    fc.asyncProperty(
      matrix,
      fc.constantFrom(",", ";", "\t", " ", "   "),
      fc.constantFrom("\n", "\r\n"),
      async (rows, separator, end) => {
        const text = rows.map((r) => r.map(String).join(separator)).join(end);
        const found = await read(text);
        expect([found.rows, found.cols]).toEqual([rows.length, rows[0]?.length]);
        expect(found.values.map((v) => v + 0)).toEqual(rows.flat().map((v) => v + 0)); // −0 is written as 0
      },
    ),
    { seed: 5, numRuns: 120 },
  );
});

test("any text at all: a matrix or an error in words", async () => {
  const piece = fc.constantFrom(
    "1",
    "-2.5",
    "nan",
    "inf",
    ",",
    ";",
    "\t",
    " ",
    "\n",
    "\r\n",
    "#",
    "x",
    "1e",
    "1,5",
    "\u00e9",
    "\0",
    "\ufeff",
  );
  await fc.assert(
    fc.asyncProperty(fc.array(piece, { minLength: 1, maxLength: 40 }), async (pieces) => {
      try {
        const { rows, cols, values } = await read(pieces.join(""));
        expect(values).toHaveLength(rows * cols);
      } catch (e) {
        if (!(e instanceof ImageFileError)) throw e;
        expect(e.message.length > 5 && e.fix.length > 5).toBe(true);
      }
    }),
    { seed: 6, numRuns: 200 },
  );
});

describe("what is wrong is told with its line", () => {
  test.each([
    ["rows of unequal length", "1,2,3\n4,5\n", /line 2: 2 values; the first row has 3/],
    ["a word", "1,2\n3,four\n", /line 2: "four" is not a number \| write nan/],
    ["a decimal comma", "1,5;2,5\n", /line 1: "1,5" is not a number \| write a point/],
    ["a gap", "1,2\n\n3,4\n", /line 2: an empty line between rows \| one matrix a file/],
    ["a head line", "a,b\n1,2\n", /text that begins with "a,b", not a matrix/],
    ["nothing but comments", "# a\n# b\n", /no numbers in it/],
    ["UTF-16", Buffer.from("\ufeff1,2\n", "utf16le"), /UTF-16/],
    ["a terminal code", "\x1b[31m1,2\n", /none of the formats/],
    ["gzip cut off", gzipSync("1,2\n3,4\n").subarray(0, 22), /gzip data cannot be unpacked/],
    ["too many columns", `${"1,".repeat(20_000)}1`, /20001 × 1 pixels; at most/],
  ])("%s", async (_, text, words) => {
    expect(await errorOf(text)).toMatch(words);
  });

  test("a bomb: refused by the length it promises, and by the limit where the promise is false", () => {
    const file = join(folder, "bomb.gz");
    const bomb = gzipSync(Buffer.alloc(3 << 20, "1 "), { level: 9 });
    const most = 1 << 20;
    writeFileSync(file, bomb);
    expect(() => readText(file, most)).toThrow("3145728 bytes of text; at most 1048576 are read");
    expect(readText(file, 3 << 20)).toHaveLength(3 << 20);
    bomb.writeUInt32LE(100, bomb.length - 4);
    writeFileSync(file, bomb);
    expect(() => readText(file, most)).toThrow("gzip data cannot be unpacked");
  });
});
