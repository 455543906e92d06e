import { ImageFileError } from "./byte_file.js";

/** What a header says of one page. */
export interface PageShape {
  readonly rows: number;
  readonly cols: number;
  /** Pixel type in short: `float32`, `uint16`. */
  readonly type: string;
}

/** An open image file: pages known from the headers, pixels read on demand. */
export interface OpenImage {
  readonly format: "tiff" | "npy";
  readonly pages: readonly PageShape[];
  /** Row-major pixels of one page, times `scale` (in double precision, then rounded to float32 once). Throws ImageFileError. */
  read(page: number, scale: number): Promise<Float32Array>;
  close(): Promise<void>;
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
