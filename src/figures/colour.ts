/** A colour as three numbers from 0 to 255. */
export type Rgb = readonly [number, number, number];

/** sRGB of a colour given by OKLab lightness (0–1), chroma and hue in degrees; where the screen cannot show it the chroma is made smaller,
 *  never the lightness. OKLab: B. Ottosson, "A perceptual color space for image processing" (2020), bottosson.github.io/posts/oklab. */
export function fromLch(lightness: number, chroma: number, hueDeg: number): Rgb {
  let low = 0;
  let high = chroma;
  let found = linearRgb(lightness, chroma, hueDeg);
  if (!inside(found)) {
    for (let k = 0; k < 30; k++) {
      const c = (low + high) / 2;
      if (inside(linearRgb(lightness, c, hueDeg))) low = c;
      else high = c;
    }
    found = linearRgb(lightness, low, hueDeg);
  }
  return [encode(found[0]), encode(found[1]), encode(found[2])];
}

/** OKLab lightness of an sRGB colour. */
export function lightnessOf([r, g, b]: Rgb): number {
  const [x, y, z] = [decode(r), decode(g), decode(b)];
  const l = Math.cbrt(0.4122214708 * x + 0.5363325363 * y + 0.0514459929 * z);
  const m = Math.cbrt(0.2119034982 * x + 0.6806995451 * y + 0.1073969566 * z);
  const s = Math.cbrt(0.0883024619 * x + 0.2817188376 * y + 0.6299787005 * z);
  return 0.2104542553 * l + 0.793617785 * m - 0.0040720468 * s;
}

export const hexOf = (c: Rgb): string => `#${c.map((v) => Math.round(v).toString(16).padStart(2, "0")).join("")}`;

export function rgbOf(hex: string): Rgb {
  const v = Number.parseInt(hex.slice(1), 16);
  return [(v >> 16) & 255, (v >> 8) & 255, v & 255];
}

function linearRgb(lightness: number, chroma: number, hueDeg: number): [number, number, number] {
  const a = chroma * Math.cos((hueDeg * Math.PI) / 180);
  const b = chroma * Math.sin((hueDeg * Math.PI) / 180);
  const l = (lightness + 0.3963377774 * a + 0.2158037573 * b) ** 3;
  const m = (lightness - 0.1055613458 * a - 0.0638541728 * b) ** 3;
  const s = (lightness - 0.0894841775 * a - 1.291485548 * b) ** 3;
  return [
    4.0767416621 * l - 3.3077115913 * m + 0.2309699292 * s,
    -1.2684380046 * l + 2.6097574011 * m - 0.3413193965 * s,
    -0.0041960863 * l - 0.7034186147 * m + 1.707614701 * s,
  ];
}

const inside = (c: readonly number[]): boolean => c.every((v) => v >= -1e-4 && v <= 1 + 1e-4);

function encode(linear: number): number {
  const v = Math.min(1, Math.max(0, linear));
  return 255 * (v <= 0.0031308 ? 12.92 * v : 1.055 * v ** (1 / 2.4) - 0.055);
}

function decode(code: number): number {
  const v = code / 255;
  return v <= 0.04045 ? v / 12.92 : ((v + 0.055) / 1.055) ** 2.4;
}
