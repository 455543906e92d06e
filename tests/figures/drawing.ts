import sharp from "sharp";
import type { Figure, Row } from "../../src/figures/index.js";
import { svgDocument } from "../../src/figures/index.js";

/** The attributes of every element that has the named one. */
export function elementsWith(svg: string, attribute: string): Record<string, string>[] {
  return Array.from(svg.matchAll(/<[a-z]+((?: [a-zA-Z0-9:-]+="[^"]*")*)\s*\/?>/g), (m) =>
    Object.fromEntries(Array.from(m[1].matchAll(/ ([a-zA-Z0-9:-]+)="([^"]*)"/g), (a) => [a[1], a[2]])),
  ).filter((e) => attribute in e);
}

/** Where a marker's path has its middle: the mean of the range that its points span. */
export function middleOf(d: string): { x: number; y: number } {
  let [x, y] = [0, 0];
  const xs: number[] = [];
  const ys: number[] = [];
  for (const [, op, rest] of d.matchAll(/([MLHVhvlmaZ])([^MLHVhvlmaZ]*)/g)) {
    const v = (rest.match(/-?[\d.]+/g) ?? []).map(Number);
    if (op === "M" || op === "L") [x, y] = v;
    else if (op === "m" || op === "l") [x, y] = [x + v[0], y + v[1]];
    else if (op === "h") x += v[0];
    else if (op === "v") y += v[0];
    else if (op === "a") {
      // half a circle to the right or left
      ys.push(y - v[0], y + v[0]);
      x += v[5];
    } else continue;
    xs.push(x);
    ys.push(y);
  }
  return { x: (Math.min(...xs) + Math.max(...xs)) / 2, y: (Math.min(...ys) + Math.max(...ys)) / 2 };
}

/** An SVG made comparable: one element a line, coordinates to a tenth of a point, images left out. */
export function normalised(f: Figure): string {
  return svgDocument(f)
    .replace(/^<\?xml.*\?>\n/, "")
    .replace(/data:image\/png;base64,[A-Za-z0-9+/=]+/g, "data:…")
    .replace(/-?\d+\.\d+/g, (v) => String(Number(Number(v).toFixed(1))))
    .replace(/></g, ">\n<");
}

/** Draws the SVG; librsvg refuses text that is not well-formed XML. */
export async function drawn(f: Figure): Promise<{ width: number; height: number; channels: number; data: Buffer }> {
  const { data, info } = await sharp(Buffer.from(svgDocument(f, "px")))
    .raw()
    .toBuffer({ resolveWithObject: true });
  return { width: info.width, height: info.height, channels: info.channels, data };
}

export const frame = (change: Row): Row => ({
  cooldown: "kv14-run1",
  branch: "cooling",
  cycle: 1,
  frame: 0,
  temperature_K: 160,
  drift_x_nm: 0,
  drift_y_nm: 0,
  drift_sd_nm: 0,
  metallic_fraction: 1,
  metallic_fraction_low: 0.99,
  metallic_fraction_high: 1,
  profiles: 0,
  wall_width_median_nm: null,
  wall_width_median_low_nm: null,
  wall_width_median_high_nm: null,
  unresolved_share: null,
  flag: "",
  analysis: 1,
  ...change,
});

export const loopRow = (change: Row): Row => ({
  cooldown: "kv14-run1",
  cycle: 1,
  cooling_half_K: 153.25,
  cooling_half_low_K: 152,
  cooling_half_high_K: 154.5,
  warming_half_K: 159.5,
  warming_half_low_K: 158.75,
  warming_half_high_K: 160.25,
  width_K: 6.25,
  width_low_K: 5,
  width_high_K: 7.5,
  ...change,
});

export const profileRow = (change: Row): Row => ({
  ...frame({}),
  wall: 0,
  profile: 0,
  width_nm: 84.5,
  width_sd_nm: 3.25,
  width_upper95_nm: 90,
  resolved: 1,
  apparent_width_nm: 91,
  tip_resolution_nm: 30,
  reduced_chi2: 1.02,
  flag: "",
  pixels: 200,
  ...change,
});

export const fringeRow = (change: Row): Row => ({
  ...frame({}),
  wall: 0,
  stretch: 0,
  detected: 1,
  p_value: 0.001,
  adjusted_p: 0.002,
  side: "metallic",
  contrast_rad: 0.2,
  contrast_sd_rad: 0.01,
  offset_nm: 40,
  period_nm: 240,
  period_sd_nm: 3,
  decay_nm: 150,
  decay_sd_nm: 8,
  ...change,
});

/** A cooling and a warming branch of five frames each, mixed in the middle. */
export const LOOP_FRAMES: readonly Row[] = [170, 160, 155, 150, 130, 131, 156, 161, 166, 171].map((t, k) => {
  const fraction = [1, 0.9, 0.625, 0.125, 0, 0, 0.0625, 0.5, 0.9375, 1][k];
  return frame({
    frame: k,
    branch: k < 5 ? "cooling" : "warming",
    temperature_K: t,
    metallic_fraction: fraction,
    metallic_fraction_low: Math.max(0, fraction - 0.03),
    metallic_fraction_high: Math.min(1, fraction + 0.02),
    drift_x_nm: 12.5 * k,
    drift_y_nm: 0 - 8 * k,
    drift_sd_nm: k === 0 ? 0 : 0.75,
    profiles: fraction > 0 && fraction < 1 ? 3 : 0,
    wall_width_median_nm: fraction > 0 && fraction < 1 ? 80 + k : null,
    wall_width_median_low_nm: fraction > 0 && fraction < 1 ? 76 + k : null,
    wall_width_median_high_nm: fraction > 0 && fraction < 1 ? 83 + k : null,
    unresolved_share: 0,
  });
});
