import type { Notice } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import type { PixelSize } from "../model/raster.js";
import { plainText } from "../model/text.js";
import { ImageFileError } from "./byte_file.js";
import { withImage } from "./image_file.js";
import type { OpenImage } from "./image_types.js";
import type { WrittenSource } from "./series_frames.js";
import { withPage } from "./source_path.js";

export type Headers = Pick<OpenImage, "format" | "pages" | "claims">;
type Place = Pick<WrittenSource, "path" | "dataset" | "written">;

/** What the headers of a cooldown's files say; each is read once, and complained of once. */
export class HeaderBook {
  readonly #known = new Map<string, Headers | { readonly error: Problem }>();
  readonly #complained = new Set<string>();
  readonly #problems: Problem[];
  readonly #notices: Notice[];
  /** Pixel sizes that files claim, by the name of the first one with each. */
  readonly pixelClaims: { readonly label: string; readonly pixel: PixelSize }[] = [];

  constructor(problems: Problem[], notices: Notice[]) {
    this.#problems = problems;
    this.#notices = notices;
  }

  /** null where the file cannot be used, which stands among the problems then. */
  async of(s: Place): Promise<Headers | null> {
    const key = placeKey(s);
    let h = this.#known.get(key);
    if (h === undefined) {
      h = await readHeaders(s);
      this.#known.set(key, h);
      if (!("error" in h)) {
        this.#claim(withPage(s.written, null), h.claims.pixel);
        const other = misnamed(s.path, h.format);
        if (other !== null) {
          const message = `${plainText(withPage(s.written, null))} is ${other}, whatever its name says: read as that`;
          this.#notices.push({ frame: null, code: "misnamed-file", message });
        }
      }
    }
    if (!("error" in h)) return h;
    if (!this.#complained.has(key)) this.#problems.push(h.error);
    this.#complained.add(key);
    return null;
  }

  #claim(label: string, pixel: PixelSize | null): void {
    if (pixel === null) return;
    if (this.pixelClaims.some((c) => samePixel(c.pixel, pixel))) return;
    this.pixelClaims.push({ label, pixel });
  }
}

/** One file, or one dataset in it. */
export const placeKey = (s: Pick<WrittenSource, "path" | "dataset">): string => `${s.path}\0${s.dataset ?? ""}`;

/** Alike to a part in a thousand: sizes written with few digits. */
export function samePixel(a: PixelSize, b: PixelSize): boolean {
  const alike = (x: number, y: number): boolean => Math.abs(x - y) <= 1e-3 * Math.abs(y);
  return alike(a.xNm, b.xNm) && alike(a.yNm, b.yNm);
}

const FORMATS: Readonly<Record<OpenImage["format"], { readonly words: string; readonly names: RegExp }>> = {
  tiff: { words: "a TIFF", names: /\.tiff?$/i },
  npy: { words: "a .npy array", names: /\.npy$/i },
  hdf5: { words: "an HDF5 file", names: /\.(h5|hdf5?|nxs)$/i },
  text: { words: "a text matrix", names: /\.(csv|tsv|txt|dat|asc)(\.gz)?$/i },
};

/** What a file is in words, where the end of its name is that of another format; null where the two agree or the name says nothing. */
function misnamed(path: string, format: OpenImage["format"]): string | null {
  const says = Object.entries(FORMATS).find(([, f]) => f.names.test(path))?.[0];
  return says === undefined || says === format ? null : FORMATS[format].words;
}

async function readHeaders(s: Place): Promise<Headers | { readonly error: Problem }> {
  try {
    return await withImage(s.path, ({ format, pages, claims }) => ({ format, pages, claims }), s.dataset);
  } catch (e) {
    if (!(e instanceof ImageFileError)) throw e;
    return { error: imageProblem(e, s.written) };
  }
}

/** What is wrong with an image file, under the name the user gave it. */
export function imageProblem(e: ImageFileError, written: string): Problem {
  return { at: plainText(e.page === null ? written : withPage(written, e.page)), problem: e.message, fix: e.fix };
}
