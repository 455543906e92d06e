import sharp from "sharp";
import { svgDocument, type Codes, type Figure } from "../figures/index.js";
import { InputError } from "../model/errors.js";
import type { StoredPreview } from "../store/pictures.js";

/** The codes of a stored preview. */
export async function decodePreview(p: StoredPreview): Promise<Codes> {
  const { data, info } = await sharp(p.image).ensureAlpha().raw().toBuffer({ resolveWithObject: true });
  const codes = new Uint8Array(2 * p.rows * p.cols);
  for (let k = 0; k < p.rows * p.cols; k++) {
    codes[2 * k] = data[info.channels * k];
    codes[2 * k + 1] = data[info.channels * k + info.channels - 1];
  }
  return { rows: p.rows, cols: p.cols, low: p.low, high: p.high, codes };
}

/** RGBA pixels as a PNG in a `data:` address. */
export async function pngAddress(rgba: Uint8Array, rows: number, cols: number): Promise<string> {
  const png = await sharp(rgba, { raw: { width: cols, height: rows, channels: 4 } })
    .png({ compressionLevel: 9 })
    .toBuffer();
  return `data:image/png;base64,${png.toString("base64")}`;
}

/** The figure as a PNG. Throws InputError where the system has no font to write its text with. */
export async function pngOf(f: Figure, dpi: number): Promise<Uint8Array> {
  if (!(await hasFont()))
    throw new InputError({
      at: "this system",
      problem: "no font is installed, so that a PNG would have no readable text",
      fix: "install one (on Debian: apt-get install fonts-dejavu-core), or write an .svg: its text is drawn where it is opened",
    });
  // librsvg counts a point as a pixel at 72 dots an inch.
  return sharp(Buffer.from(svgDocument(f, "px")), { density: dpi, unlimited: true })
    .flatten({ background: f.style.background })
    .withMetadata({ density: dpi })
    .png({ compressionLevel: 9 })
    .toBuffer();
}

/** Whether text can be drawn: without a font all letters come out as the same box, or as nothing. */
export async function hasFont(): Promise<boolean> {
  const draw = (text: string): Promise<Buffer> =>
    sharp(
      Buffer.from(
        `<svg xmlns="http://www.w3.org/2000/svg" width="60" height="20"><text x="2" y="15" font-size="14" font-family="sans-serif">${text}</text></svg>`,
      ),
    )
      .raw()
      .toBuffer();
  const [a, b] = await Promise.all([draw("iii"), draw("MMM")]);
  return !a.equals(b);
}
