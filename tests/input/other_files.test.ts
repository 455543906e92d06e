import { copyFileSync, mkdtempSync, readFileSync, rmSync, utimesSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { Worker } from "node:worker_threads";
import { crc32, gunzipSync } from "node:zlib";
import { afterAll, describe, expect, test } from "vitest";
import { ImageFileError } from "../../src/input/byte_file.js";
import { closeImages, withImage } from "../../src/input/image_file.js";
import type { OpenImage } from "../../src/input/image_types.js";
import { omePixelSize } from "../../src/input/ome.js";
import { splitPath, withPage } from "../../src/input/source_path.js";
import { makeRandom } from "../../src/numerics/random.js";

const FOLDER = join(import.meta.dirname, "../../fixtures/files");
const expected = JSON.parse(readFileSync(join(FOLDER, "expected.json"), "utf8")) as {
  files: Record<string, number[][]>;
};
const scratch = mkdtempSync(join(tmpdir(), "coldseam-files-"));
afterAll(async () => {
  await closeImages();
  rmSync(scratch, { recursive: true });
});

/** Opens a place as a user writes it. */
function open<T>(written: string, f: (image: OpenImage) => T | Promise<T>, folder = FOLDER): Promise<T> {
  const { file, dataset } = splitPath(written);
  return withImage(join(folder, file), f, dataset);
}

function checksum(values: Float32Array): number {
  const bits = new Uint32Array(Float32Array.from(values).buffer);
  values.forEach((v, k) => {
    if (Number.isNaN(v)) bits[k] = 0x7fc00000;
  });
  return crc32(new Uint8Array(bits.buffer));
}

async function errorOf(written: string, folder = FOLDER): Promise<string> {
  try {
    await open(written, (image) => image.read(0, 1), folder);
  } catch (e) {
    if (e instanceof ImageFileError) return `${e.message} | ${e.fix}`;
    throw e;
  }
  throw new Error(`${written} was read`);
}

describe("values as other programs wrote them, to the bit", () => {
  test.each(Object.keys(expected.files))("%s", async (written) => {
    const planes = expected.files[written];
    const found = await open(written, async (image) => {
      const out: number[][] = [];
      for (const plane of planes.keys()) {
        const pages: number[] = [];
        for (const page of image.pages.keys()) {
          expect(image.pages[page]).toMatchObject({ rows: 19, cols: 23, planes: planes.length });
          pages.push(checksum(await image.read(page, 1, planes.length === 1 ? undefined : plane)));
        }
        out.push(pages);
      }
      return out;
    });
    expect(found).toEqual(planes);
  });

  test("a half, a boolean, an old-order double in clear", async () => {
    const at = (name: string): Promise<string> => open(`types.h5:/t/${name}`, (image) => image.pages[0]?.type ?? "");
    expect(await Promise.all(["lef2", "bool", "bef8", "bec16"].map(at))).toEqual([
      "float16",
      "int8",
      "float64",
      "complex128",
    ]);
  });

  test("one sample of several must be named, and exist", async () => {
    expect(await errorOf("samples-f4.tif")).toMatch(/^3 samples a pixel .* \| name the sample/);
    await expect(open("samples-f4.tif", (image) => image.read(0, 1, 3))).rejects.toThrow("no sample 3: 3 samples");
  });
});

describe("what a file says of itself", () => {
  test.each([
    ["sized.ome.tif", { xNm: 10, yNm: 12 }, null],
    ["run.nxs:/entry/data/amplitude", { xNm: 10, yNm: 12 }, [180, 175, 170]],
    ["run.nxs:/entry/data", { xNm: 10, yNm: 12 }, [180, 175, 170]],
    ["run.nxs:/entry", { xNm: 10, yNm: 12 }, [180, 175, 170]],
    ["run.nxs:/old/signal", null, [180, 170, 160]], // one axis is uneven
    ["run.nxs:/bare/a", null, null], // no units
    ["types.h5:/flat", null, null],
    ["complex-c8.npy", null, null],
  ])("%s", async (written, pixel, temperatures) => {
    const claims = await open(written, (image) => image.claims);
    expect(claims.pixel).toEqual(pixel);
    expect(claims.temperaturesK === null ? null : claims.temperaturesK.map((t) => Number(t.toFixed(9)))).toEqual(
      temperatures,
    );
  });

  test.each([
    ['<OME><Pixels PhysicalSizeX="0.02" PhysicalSizeY="0.03"/></OME>', { xNm: 20, yNm: 30 }], // µm by default
    [
      "<?xml version='1.0'?><ome:OME><ome:Pixels PhysicalSizeX='5' PhysicalSizeXUnit='&#197;' PhysicalSizeY='1e-8' PhysicalSizeYUnit='m'>",
      { xNm: 0.5, yNm: 10 },
    ],
    [
      '<OME><Pixels PhysicalSizeX="1" PhysicalSizeXUnit="&#xB5;m" PhysicalSizeY="1" PhysicalSizeYUnit="\u03bcm"/>',
      { xNm: 1000, yNm: 1000 },
    ],
    ['<OME><Pixels PhysicalSizeX="1" PhysicalSizeXUnit="pixel" PhysicalSizeY="1" PhysicalSizeYUnit="nm"/>', null],
    ['<OME><Pixels PhysicalSizeX="0" PhysicalSizeY="1"/>', null],
    ['<OME><Pixels SizeX="3"/>', null],
    ['<Pixels PhysicalSizeX="1" PhysicalSizeY="1"/>', null],
    ["", null],
  ])("%s", (xml, size) => {
    const found = omePixelSize(xml);
    if (size === null) expect(found).toBeNull();
    else expect([found?.xNm, found?.yNm]).toEqual([expect.closeTo(size.xNm, 9), expect.closeTo(size.yNm, 9)]);
  });
});

describe("what is no image, or lies elsewhere, is refused with words", () => {
  test.each([
    ["types.h5", /an HDF5 file, and no dataset is named; it holds \/.* and \d+ more \| .*"FILE:\//],
    ["types.h5:/nowhere", /no dataset "\/nowhere"; it holds/],
    ["types.h5:/t", /"\/t" is no dataset; it holds/],
    ["types.h5:/dangling", /"\/dangling" is no dataset/],
    ["types.h5:/words", /\/words does not hold numbers/],
    ["types.h5:/pair", /\/pair does not hold numbers/],
    ["types.h5:/line", /shape \(16\)/],
    ["types.h5:/many", /shape \(2, 2, 2, 2\)/],
    ["outward.h5:/external", /its data lie in another file, ".*types\.h5", which is not followed/],
    ["outward.h5:/virtual", /its data lie in another file, ".*types\.h5"/],
    ["outward.h5:/storage", /its data lie in another file, "\/etc\/hostname"/],
    ["outward.h5:/wide", /100000 × 100000 pixels; at most/],
    ["outward.h5:/coarse", /chunks of 4294967296 bytes/],
    ["sized.ome.tif:/entry", /no HDF5 file, so it has no dataset "\/entry"/],
    ["types.h5:/t/lec8", /complex numbers; expected one number a pixel \| name it `signal`/],
  ])("%s", async (written, words) => {
    expect(await errorOf(written)).toMatch(words);
  });

  test("an HDF5 file inside the others is still read after them", async () => {
    expect(checksum(await open("types.h5:/flat", (image) => image.read(0, 1)))).toBe(
      expected.files["types.h5:/flat"][0][0],
    );
  });

  test("a chunk that swells to 600 MB is refused before the memory is taken", { timeout: 60_000 }, async () => {
    writeFileSync(join(scratch, "bomb.h5"), gunzipSync(readFileSync(join(FOLDER, "bomb.h5.gz"))));
    const before = process.memoryUsage.rss();
    expect(await errorOf("bomb.h5:/bomb", scratch)).toMatch(/^HDF5: /);
    expect(process.memoryUsage.rss() - before).toBeLessThan(600 << 20);
    expect(await errorOf("types.h5:/line")).toMatch(/shape/); // and the reader still works
  });

  test("cut off anywhere, or with bytes changed: values or words", async () => {
    const whole = readFileSync(join(FOLDER, "run.nxs"));
    const file = join(scratch, "damaged.nxs");
    const random = makeRandom(11);
    let refused = 0;
    for (let k = 0; k < 60; k++) {
      const bytes = Buffer.from(k < 20 ? whole.subarray(0, Math.floor((k / 20) * whole.length)) : whole);
      for (let n = k < 20 ? 0 : 1 + random.below(8); n > 0; n--) {
        bytes[random.below(random.below(3) === 0 ? bytes.length : 4000)] = [0, 255, 1, random.below(256)][
          random.below(4)
        ];
      }
      writeFileSync(file, bytes);
      utimesSync(file, 1000 + k, 1000 + k);
      const start = performance.now();
      try {
        const { rows } = await open(
          "damaged.nxs:/entry/data",
          async (image) => {
            await image.read(0, 1);
            return image.pages[0] ?? { rows: 0 };
          },
          scratch,
        );
        expect(rows).toBeGreaterThan(0);
      } catch (e) {
        if (!(e instanceof ImageFileError)) throw e;
        refused++;
        expect(e.message.length > 5 && e.fix.length > 5).toBe(true);
      }
      expect(performance.now() - start).toBeLessThan(5000);
    }
    expect(refused).toBeGreaterThanOrEqual(20);
  });
});

test("HDF5 is read in a worker thread, and from two threads at once", async () => {
  const code = `
    const { parentPort, workerData } = require("node:worker_threads");
    import(workerData.module).then(async ({ withImage }) => {
      const values = await withImage(workerData.file, (image) => image.read(1, 1), "/chunked");
      parentPort.postMessage(values);
    }).catch((e) => parentPort.postMessage(String(e)));
  `;
  const module = new URL("../../dist/input/image_file.js", import.meta.url).href;
  copyFileSync(join(FOLDER, "types.h5"), join(scratch, "types.h5"));
  const inWorker = (): Promise<unknown> =>
    new Promise((resolve, reject) => {
      const worker = new Worker(code, { eval: true, workerData: { module, file: join(scratch, "types.h5") } });
      worker.once("message", (m) => {
        resolve(m);
        void worker.terminate();
      });
      worker.once("error", reject);
    });
  const here = await open("types.h5:/chunked", (image) => image.read(1, 1));
  expect(await Promise.all([inWorker(), inWorker()])).toEqual([here, here]);
});

describe("the parts of a written path", () => {
  test.each([
    ["stack.tif", "stack.tif", null, null, null],
    ["stack.tif#3", "stack.tif", null, 3, null],
    ["stack.tif#3:1", "stack.tif", null, 3, 1],
    ["stack.tif#:1", "stack.tif", null, null, 1],
    ["run.h5:/entry/data/a", "run.h5", "/entry/data/a", null, null],
    ["run.h5:/a#12", "run.h5", "/a", 12, null],
    ["C:/data/run.h5:/a#0", "C:/data/run.h5", "/a", 0, null],
    ["C:/data/x.tif", "C:/data/x.tif", null, null, null],
    ["odd#name.tif", "odd#name.tif", null, null, null],
    ["odd#", "odd#", null, null, null],
    ["odd#:", "odd#:", null, null, null],
  ])("%s", (written, file, dataset, page, sample) => {
    expect(splitPath(written)).toEqual({ file, dataset, page, sample });
    expect(splitPath(withPage(written, 7))).toEqual({ file, dataset, page: 7, sample });
    if (page === null) expect(withPage(written, null)).toBe(written);
  });
});
