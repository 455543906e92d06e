import type { PixelSize } from "../model/raster.js";

const NM_PER: Readonly<Record<string, number>> = {
  m: 1e9,
  cm: 1e7,
  mm: 1e6,
  µm: 1e3,
  um: 1e3,
  nm: 1,
  pm: 1e-3,
  Å: 0.1,
};

/**
 * Pixel size from the OME-XML in a TIFF's description: `PhysicalSizeX` and `PhysicalSizeY` of the first `Pixels` element, in their
 * unit (µm where none is given). null where there is no OME-XML, or a size in it that is not a positive length.
 * Source: the OME data model, schema 2016-06. Only these attributes are looked for; the XML is not otherwise read.
 */
export function omePixelSize(description: string): PixelSize | null {
  if (!/<(\w+:)?OME\b/.test(description)) return null;
  const start = description.search(/<(\w+:)?Pixels\b/);
  if (start < 0) return null;
  const element = description.slice(start, start + 4096).split(">", 1)[0];
  const lengthNm = (axis: "X" | "Y"): number | null => {
    const value = Number(attribute(element, `PhysicalSize${axis}`));
    const unit = attribute(element, `PhysicalSize${axis}Unit`) ?? "µm";
    // The micro sign and the Greek letter, the ångström sign and the letter, are one each after normalising.
    const nmPer = NM_PER[unit.normalize("NFKC").replace("\u03bc", "µ")];
    return value > 0 && Number.isFinite(value) && nmPer !== undefined ? value * nmPer : null;
  };
  const [xNm, yNm] = [lengthNm("X"), lengthNm("Y")];
  return xNm === null || yNm === null ? null : { xNm, yNm };
}

function attribute(element: string, name: string): string | undefined {
  const m = new RegExp(`\\s${name}\\s*=\\s*(?:"([^"]*)"|'([^']*)')`).exec(element);
  const text = m?.[1] ?? m?.[2];
  return text
    ?.replace(/&#x([0-9a-f]{1,6});/gi, (_, hex: string) => character(Number.parseInt(hex, 16)))
    .replace(/&#(\d{1,7});/g, (_, decimal: string) => character(Number(decimal)));
}

const character = (code: number): string => (code <= 0x10ffff ? String.fromCodePoint(code) : "");
