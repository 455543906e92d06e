import { createRequire } from "node:module";
import type { OpenCv } from "opencv-wasm";
import { conjugateProduct } from "./fourier.js";

type Mat = InstanceType<OpenCv["Mat"]>;

/** Loading the WebAssembly build adds listeners for `uncaughtException` and `unhandledRejection` that turn any stray
 *  rejection of the host program into "abort(…)": what it added is taken off again. */
function load(): OpenCv {
  const exceptions = new Set(process.listeners("uncaughtException"));
  const rejections = new Set(process.listeners("unhandledRejection"));
  const loaded: { readonly cv: OpenCv } = createRequire(import.meta.url)("opencv-wasm");
  for (const f of process.listeners("uncaughtException")) {
    if (!exceptions.has(f)) process.removeListener("uncaughtException", f);
  }
  for (const f of process.listeners("unhandledRejection")) {
    if (!rejections.has(f)) process.removeListener("unhandledRejection", f);
  }
  return loaded.cv;
}

let loadedCv: OpenCv | null = null;

/** Loaded at the first use: a thread or command that needs none of it does not wait for it. */
function opencv(): OpenCv {
  loadedCv ??= load();
  return loadedCv;
}

/** Runs `work` with a maker of matrices that are all freed at the end; OpenCV's thrown pointers become Errors. */
function withMats<T>(work: (cv: OpenCv, make: (rows: number, cols: number, type: number) => Mat) => T): T {
  const made: Mat[] = [];
  const cv = opencv();
  try {
    return work(cv, (rows, cols, type) => {
      const mat = rows === 0 ? new cv.Mat() : new cv.Mat(rows, cols, type);
      made.push(mat);
      return mat;
    });
  } catch (e) {
    if (typeof e === "number") throw new Error(`OpenCV: ${cv.exceptionFromPtr(e).msg}`, { cause: e });
    throw e;
  } finally {
    for (const mat of made) mat.delete();
  }
}

function checkSize(length: number, rows: number, cols: number, each = 1): void {
  if (rows < 1 || cols < 1 || length !== rows * cols * each) {
    throw new RangeError(`${length} values for ${rows} × ${cols} pixels`);
  }
}

/** Taps on one side of a blur's kernel: beyond 4 σ a Gaussian holds 6e-5 of its weight. */
const halfKernel = (sigmaPx: number): number => (sigmaPx > 0 ? Math.ceil(4 * sigmaPx) : 0);

/** Gaussian blur of a row-major image without missing pixels (one NaN would spread over the whole kernel: see
 *  `maskedBlur`). Outside the image counts as 0 (`"zero"`) or as its mirror image (`"mirror"`, the default).
 *  @returns a new array; σ = 0 along an axis leaves that axis alone */
export function gaussianBlur(
  data: Float32Array,
  rows: number,
  cols: number,
  sigmaXPx: number,
  sigmaYPx: number,
  outside: "zero" | "mirror" = "mirror",
): Float32Array {
  checkSize(data.length, rows, cols);
  return blurOf(rows, cols, sigmaXPx, sigmaYPx, outside, (src) => src.set(data));
}

/** The same of an image that `fill` writes, row-major, into memory that holds anything. */
export function blurOf(
  rows: number,
  cols: number,
  sigmaXPx: number,
  sigmaYPx: number,
  outside: "zero" | "mirror",
  fill: (image: Float32Array) => void,
): Float32Array {
  if (!(sigmaXPx >= 0) || !(sigmaYPx >= 0)) throw new RangeError(`blur of ${sigmaXPx}, ${sigmaYPx} px`);
  return withMats((cv, make) => {
    const src = make(rows, cols, cv.CV_32FC1);
    const dst = make(0, 0, 0);
    fill(src.data32F);
    const size = new cv.Size(2 * halfKernel(sigmaXPx) + 1, 2 * halfKernel(sigmaYPx) + 1);
    const border = outside === "zero" ? cv.BORDER_CONSTANT : cv.BORDER_REFLECT_101;
    // a second sigma of 0 would be read as "like the first": a kernel of one tap is 1 whatever its sigma
    cv.GaussianBlur(src, dst, size, Math.max(sigmaXPx, 1e-3), Math.max(sigmaYPx, 1e-3), border);
    return dst.data32F.slice();
  });
}

/** Two-dimensional discrete Fourier transform of a real row-major image: interleaved complex, rows × cols × 2. */
export function dft2(data: Float64Array, rows: number, cols: number): Float64Array {
  checkSize(data.length, rows, cols);
  return withMats((cv, make) => {
    const src = make(rows, cols, cv.CV_64FC1);
    const dst = make(0, 0, 0);
    src.data64F.set(data);
    cv.dft(src, dst, cv.DFT_COMPLEX_OUTPUT, 0);
    return dst.data64F.slice();
  });
}

/** Inverse of `dft2`, scaled by 1/(rows·cols), for spectra of real images: the real part, rows × cols. */
export function idft2(spectrum: Float64Array, rows: number, cols: number): Float64Array {
  checkSize(spectrum.length, rows, cols, 2);
  return withMats((cv, make) => {
    const src = make(rows, cols, cv.CV_64FC2);
    const dst = make(0, 0, 0);
    src.data64F.set(spectrum);
    cv.dft(src, dst, cv.DFT_INVERSE + cv.DFT_SCALE + cv.DFT_REAL_OUTPUT, 0);
    return dst.data64F.slice();
  });
}

/** Σ_x a(x) b(x + lag) at each lag, rows × cols, negative lags wrapped to the far end, from the spectra that `dft2` gives.
 *  @param out where the answer goes, rows·cols long: correlations are many, and new memory for each costs more than the transform */
export function correlate2(a: Float64Array, b: Float64Array, rows: number, cols: number, out: Float64Array): void {
  checkSize(a.length, rows, cols, 2);
  checkSize(b.length, rows, cols, 2);
  checkSize(out.length, rows, cols);
  withMats((cv, make) => {
    const src = make(rows, cols, cv.CV_64FC2);
    const dst = make(0, 0, 0);
    conjugateProduct(a, b, src.data64F);
    cv.dft(src, dst, cv.DFT_INVERSE + cv.DFT_SCALE + cv.DFT_REAL_OUTPUT, 0);
    out.set(dst.data64F);
  });
}

/** Connected regions of the non-zero pixels of `mask`, joined over sides (4) or sides and corners (8).
 *  @returns `labels` 0 outside, 1 … `count` inside, in the order of the first pixel met row by row */
export function connectedComponents(
  mask: Uint8Array,
  rows: number,
  cols: number,
  connectivity: 4 | 8,
): { count: number; labels: Int32Array } {
  checkSize(mask.length, rows, cols);
  const raw = withMats((cv, make) => {
    const src = make(rows, cols, cv.CV_8UC1);
    const dst = make(0, 0, 0);
    src.data.set(mask);
    const count = cv.connectedComponents(src, dst, connectivity, cv.CV_32S) - 1;
    return { count, labels: dst.data32S.slice() };
  });
  // OpenCV numbers by its own block scan: renumber, so that labels do not depend on its inner order
  const order = new Int32Array(raw.count + 1);
  let next = 0;
  for (let p = 0; p < raw.labels.length; p++) {
    const label = raw.labels[p];
    if (label === 0) continue;
    if (order[label] === 0) order[label] = ++next;
    raw.labels[p] = order[label];
  }
  return raw;
}

/** Exact Euclidean distance in pixels from each non-zero pixel of `mask` to the nearest zero pixel (centre to centre);
 *  0 on zero pixels. Square pixels only: where the pitch differs, distances in nm need another way. With no zero pixel
 *  at all every distance is Infinity. */
export function distanceTransform(mask: Uint8Array, rows: number, cols: number): Float32Array {
  checkSize(mask.length, rows, cols);
  if (!mask.includes(0)) return new Float32Array(mask.length).fill(Number.POSITIVE_INFINITY);
  return withMats((cv, make) => {
    const src = make(rows, cols, cv.CV_8UC1);
    const dst = make(0, 0, 0);
    src.data.set(mask);
    cv.distanceTransform(src, dst, cv.DIST_L2, cv.DIST_MASK_PRECISE);
    return dst.data32F.slice();
  });
}
