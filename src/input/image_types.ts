import type { PixelSize } from "../model/raster.js";
import { ImageFileError } from "./byte_file.js";

export type ImageFormat = "tiff" | "npy" | "hdf5" | "text";

/** What a header says of one page. */
export interface PageShape {
  readonly rows: number;
  readonly cols: number;
  /** Pixel type in short: `float32`, `uint16`, `complex64`. */
  readonly type: string;
  /** Values a pixel: samples of a TIFF; 2, the real and the imaginary part, of complex numbers. */
  readonly planes: number;
  readonly complex: boolean;
}

/** Whether a file of one page with several numbers a pixel may be a stack: some programs write the images of a stack as the samples of one
 *  page. Not where they are bytes, as those of a colour picture are. */
export function mayBeSamplesOfStack(pages: readonly PageShape[]): boolean {
  const [page] = pages;
  return pages.length === 1 && page.planes > 1 && !page.complex && !/^u?int8$/.test(page.type);
}

/** What a file says of itself beyond its pixels; null where it says nothing that can be used. */
export interface FileClaims {
  readonly pixel: PixelSize | null;
  /** A temperature a page. */
  readonly temperaturesK: readonly number[] | null;
}
export const NO_CLAIMS: FileClaims = { pixel: null, temperaturesK: null };

/** An open image file (one dataset of an HDF5 file): pages known from the headers, pixels read on demand. */
export interface OpenImage {
  readonly format: ImageFormat;
  readonly pages: readonly PageShape[];
  readonly claims: FileClaims;
  /**
   * Row-major pixels of one page, times `scale` (in double precision, then rounded to float32 once).
   * @param plane which of several values a pixel; may be left out only where there is one. Throws ImageFileError.
   */
  read(page: number, scale: number, plane?: number): Promise<Float32Array>;
  close(): Promise<void>;
}

/** The plane that a read asks for, from 0. Throws ImageFileError where it does not exist, or where one must be named. */
export function choosePlane(shape: PageShape, plane: number | undefined, page: number): number {
  if (plane === undefined && shape.planes === 1) return 0;
  if (plane !== undefined && plane >= 0 && plane < shape.planes) return plane;
  if (shape.complex) {
    const fix = "name it `signal`: it gives amplitude and phase";
    throw new ImageFileError("complex numbers; expected one number a pixel", fix, page);
  }
  const found = `${shape.planes} samples a pixel`;
  if (plane !== undefined) {
    throw new ImageFileError(`no sample ${plane}: ${found}`, "samples count from 0", page);
  }
  throw new ImageFileError(
    `${found} (a colour picture?); expected one number`,
    "name the sample (`#0:1` is the second of the first page), or export the measured values",
    page,
  );
}

/** Scans of this kind have 64 to 2048 pixels a side; beyond these limits a header is damaged or hostile. */
const MAX_SIDE_PX = 16384;
const MAX_PIXELS = 2 ** 26;
export const MAX_PAGES = 10_000;

/** Refuses sizes that no scan has before any memory is taken for them. Throws ImageFileError. */
export function checkSize(rows: number, cols: number, page: number | null): void {
  const whole = Number.isSafeInteger(rows) && Number.isSafeInteger(cols);
  if (!whole || rows < 1 || cols < 1) {
    throw new ImageFileError(
      `${cols} × ${rows} pixels; expected at least 1 × 1`,
      "the file is damaged: copy it again",
      page,
    );
  }
  if (rows > MAX_SIDE_PX || cols > MAX_SIDE_PX || rows * cols > MAX_PIXELS) {
    throw new ImageFileError(
      `${cols} × ${rows} pixels; at most ${MAX_SIDE_PX} a side and ${MAX_PIXELS} in all are read`,
      "crop or bin the image, or copy the file again if this is not its size",
      page,
    );
  }
}
