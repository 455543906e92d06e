import { describe, expect, test } from "vitest";
import { connectedComponents, dft2, distanceTransform, gaussianBlur, idft2 } from "../../src/raster/opencv.js";
import { conjugateProduct, fastLength, zeroPad } from "../../src/raster/fourier.js";
import { maskedBlur } from "../../src/raster/masked_blur.js";
import { sampleCubic } from "../../src/raster/sample.js";
import { makeRandom } from "../../src/numerics/random.js";

const noise = (n: number, seed: number): Float32Array => {
  const random = makeRandom(seed);
  return Float32Array.from({ length: n }, () => random.normal());
};

describe("opencv", () => {
  test("loading it leaves no listener on stray rejections behind", () => {
    for (const event of ["uncaughtException", "unhandledRejection"] as const) {
      const texts = process.rawListeners(event).map(String);
      expect(texts.filter((t) => t.includes("ExitStatus") || t.includes("onAbort"))).toEqual([]);
    }
  });

  test("the transform there and back; its first term is the sum", () => {
    const data = Float64Array.from(noise(12 * 15, 1));
    const spectrum = dft2(data, 12, 15);
    expect(spectrum[0]).toBeCloseTo(
      data.reduce((a, b) => a + b, 0),
      10,
    );
    idft2(spectrum, 12, 15).forEach((v, p) => expect(v).toBeCloseTo(data[p], 12));
  });

  test("a blurred point is a Gaussian of each axis' own sigma", () => {
    const rows = 41;
    const cols = 51;
    const data = new Float32Array(rows * cols);
    data[20 * cols + 25] = 1;
    const out = gaussianBlur(data, rows, cols, 3, 1.5);
    for (const [di, dj] of [
      [0, 0],
      [2, 4],
      [-3, 5],
    ] as const) {
      const want = Math.exp(-0.5 * ((dj / 3) ** 2 + (di / 1.5) ** 2)) / (2 * Math.PI * 3 * 1.5);
      expect(out[(20 + di) * cols + 25 + dj]).toBeCloseTo(want, 5);
    }
    // no blur along an axis leaves that axis alone
    const along = gaussianBlur(data, rows, cols, 2, 0);
    expect(along[19 * cols + 25]).toBe(0);
    expect(along[20 * cols + 25]).toBeCloseTo(1 / (2 * Math.sqrt(2 * Math.PI)), 4);
  });

  test("corners join regions with 8 neighbours and not with 4; labels count from the first pixel", () => {
    const mask = Uint8Array.from([0, 0, 1, 1, 0, 0, 0, 1, 0]);
    expect(connectedComponents(mask, 3, 3, 4).count).toBe(3);
    const eight = connectedComponents(mask, 3, 3, 8);
    expect(eight.count).toBe(2);
    const diagonal = connectedComponents(Uint8Array.from([0, 0, 1, 0, 1, 0, 1, 0, 0]), 3, 3, 8);
    expect(diagonal.count).toBe(1);
    const order = connectedComponents(Uint8Array.from([1, 0, 1, 0, 0, 0, 1, 0, 1]), 3, 3, 4);
    expect([...order.labels]).toEqual([1, 0, 2, 0, 0, 0, 3, 0, 4]);
  });

  test("distances are Euclidean, from centre to centre", () => {
    const mask = new Uint8Array(9 * 9).fill(1);
    mask[0] = 0;
    const d = distanceTransform(mask, 9, 9);
    expect(d[0]).toBe(0);
    expect(d[3 * 9 + 4]).toBeCloseTo(5, 5);
    expect(distanceTransform(new Uint8Array(4).fill(1), 2, 2)[0]).toBe(Number.POSITIVE_INFINITY);
  });

  test("an error says what is wrong instead of throwing a number", () => {
    expect(() => gaussianBlur(new Float32Array(6), 2, 2, 1, 1)).toThrow(/6 values for 2 × 2 pixels/);
  });
});

describe("masked blur", () => {
  test("missing pixels are left out: a plane stays a plane value in the middle of a symmetric gap", () => {
    const rows = 31;
    const cols = 31;
    const data = new Float32Array(rows * cols);
    for (let i = 0; i < rows; i++) for (let j = 0; j < cols; j++) data[i * cols + j] = 1000 + i - 2 * j;
    for (let j = 14; j <= 16; j++) data[15 * cols + j] = Number.NaN;
    const { values, weight } = maskedBlur(data, null, rows, cols, 1.5, 1.5);
    expect(values[15 * cols + 15]).toBeCloseTo(1000 + 15 - 30, 3);
    // what three pixels of a Gaussian of 1.5 px in the middle row weigh: 0.26596 × (0.26596 + 2 × 0.21297)
    expect(weight[15 * cols + 15]).toBeCloseTo(1 - 0.18402, 4);
    expect(weight[5 * cols + 20]).toBeCloseTo(1, 3);
  });

  test("nothing within the kernel gives NaN, not a number", () => {
    const data = new Float32Array(400).fill(3);
    const usable = new Uint8Array(400);
    usable[0] = 1;
    const { values } = maskedBlur(data, usable, 20, 20, 1, 1);
    expect(values[0]).toBeCloseTo(3, 6);
    expect(values[19 * 20 + 19]).toBeNaN();
  });
});

describe("sampling", () => {
  test("a quadratic is met exactly at any position; borders and gaps give NaN", () => {
    const f = (y: number, x: number): number => 2 + 0.5 * x - y + 0.1 * x * x + 0.2 * x * y - 0.05 * y * y;
    const data = new Float32Array(12 * 10);
    for (let i = 0; i < 12; i++) for (let j = 0; j < 10; j++) data[i * 10 + j] = f(i, j);
    for (const [y, x] of [
      [3.3, 4.7],
      [5, 2.25],
      [9.9, 7.5],
      [11, 9],
    ] as const) {
      expect(sampleCubic(data, 12, 10, y, x)).toBeCloseTo(f(y, x), 4);
    }
    expect(sampleCubic(data, 12, 10, 0.5, 4)).toBeNaN();
    expect(sampleCubic(data, 12, 10, -0.1, 4)).toBeNaN();
    data[4 * 10 + 4] = Number.NaN;
    expect(sampleCubic(data, 12, 10, 3.5, 4.5)).toBeNaN();
    // a whole position needs its own pixel alone
    expect(sampleCubic(data, 12, 10, 4, 5)).toBeCloseTo(f(4, 5), 4);
  });
});

describe("fourier", () => {
  test("fast lengths hold no prime above 5", () => {
    expect([1, 7, 11, 131, 251, 511].map(fastLength)).toEqual([1, 8, 12, 135, 256, 512]);
  });

  test("the inverse of a conjugate product is the correlation at each lag, without wrapping once padded", () => {
    const a = noise(5 * 6, 2);
    const b = noise(5 * 6, 3);
    const spectra = [a, b].map((v) => dft2(zeroPad(v, 5, 6, 10, 12), 10, 12));
    const c = idft2(conjugateProduct(spectra[0], spectra[1]), 10, 12);
    for (const [dy, dx] of [
      [0, 0],
      [2, -3],
      [-4, 5],
    ] as const) {
      let want = 0;
      for (let i = 0; i < 5; i++) {
        for (let j = 0; j < 6; j++) {
          const y = i + dy;
          const x = j + dx;
          if (y >= 0 && y < 5 && x >= 0 && x < 6) want += a[i * 6 + j] * b[y * 6 + x];
        }
      }
      expect(c[((dy + 10) % 10) * 12 + ((dx + 12) % 12)]).toBeCloseTo(want, 10);
    }
  });
});
