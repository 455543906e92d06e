import { rgbOf } from "../../figures/colour.js";
import { mapOf, type Shown } from "../../figures/paint.js";
import { styleNamed } from "../../figures/style.js";
import type { Cooldown } from "./cooldown.js";
import type { Frame } from "./frames.js";
import type { Projection } from "./view.js";

const STYLE = styleNamed("paper");

/** Little-endian ABGR, as a 32-bit view of canvas pixels has it. */
const word = (r: number, g: number, b: number): number =>
  (255 << 24) | (Math.round(b) << 16) | (Math.round(g) << 8) | Math.round(r);

const pens = new Map<string, CanvasRenderingContext2D>();

/** A canvas of its own for each use, of the size of an image. */
function pen(use: string, rows: number, cols: number): CanvasRenderingContext2D {
  let p = pens.get(use);
  if (p === undefined) {
    const made = document.createElement("canvas").getContext("2d");
    if (made === null) throw new Error("no canvas");
    pens.set(use, (p = made));
  }
  if (p.canvas.width !== cols || p.canvas.height !== rows) Object.assign(p.canvas, { width: cols, height: rows });
  return p;
}

/** Draws one channel of a frame, or its states, where it lies in the cooldown. Pixels stay pixels. Returns false where the frame has none. */
export function drawRaster(
  to: CanvasRenderingContext2D,
  p: Projection,
  cooldown: Cooldown,
  frame: Frame,
  shown: Shown,
  use: string,
): boolean {
  const image = shown === "states" ? statesImage(frame, use) : channelImage(cooldown, frame, shown, use);
  if (image === null) return false;
  put(to, p, cooldown, frame, image);
  return true;
}

/** Veils all of a frame but one of its domains. Returns false where the frame has no such domain. */
export function drawVeil(
  to: CanvasRenderingContext2D,
  p: Projection,
  cooldown: Cooldown,
  frame: Frame,
  domain: number,
  use: string,
): boolean {
  const { domains, rows, cols } = frame;
  if (domains === null || !domains.includes(domain + 1)) return false;
  const canvas = filled(use, rows, cols, (out) => {
    for (let k = 0; k < out.length; k++) if (domains[k] !== domain + 1) out[k] = VEIL;
  });
  put(to, p, cooldown, frame, { canvas, steps: [1, 1] });
  return true;
}

function put(to: CanvasRenderingContext2D, p: Projection, cooldown: Cooldown, frame: Frame, image: Painted): void {
  const d = cooldown.drift(frame.frame) ?? { xNm: 0, yNm: 0 };
  const { pixelXNm, pixelYNm } = cooldown.info;
  const [stepX, stepY] = image.steps;
  const left = p.x(d.xNm - pixelXNm / 2);
  const top = p.y(d.yNm - pixelYNm / 2);
  to.save();
  to.beginPath(); // the last row and column of an image may stand for fewer pixels than the others
  to.rect(left, top, (frame.cols * pixelXNm) / p.view.nmPerPx, (frame.rows * pixelYNm) / p.view.nmPerPx);
  to.clip();
  to.imageSmoothingEnabled = false;
  to.drawImage(
    image.canvas,
    left,
    top,
    (image.canvas.width * stepX * pixelXNm) / p.view.nmPerPx,
    (image.canvas.height * stepY * pixelYNm) / p.view.nmPerPx,
  );
  to.restore();
}

/** A middle grey, through which the picture is seen: both states stand out against it. */
const VEIL = (165 << 24) | 0x868a8a;

/** An image of its own for each use, filled with colours; what is not set stays transparent. */
function filled(use: string, rows: number, cols: number, fill: (out: Int32Array) => void): HTMLCanvasElement {
  const to = pen(use, rows, cols);
  const pixels = to.createImageData(cols, rows);
  fill(new Int32Array(pixels.data.buffer));
  to.putImageData(pixels, 0, 0);
  return to.canvas;
}

interface Painted {
  readonly canvas: HTMLCanvasElement;
  readonly steps: readonly [number, number];
}

function channelImage(cooldown: Cooldown, frame: Frame, shown: Exclude<Shown, "states">, use: string): Painted | null {
  const c = frame.channels[shown];
  const scale = cooldown.index.scales[shown];
  if (c === undefined || scale === undefined) return null;
  const { rows, cols, low, high, stepX, stepY } = c.head;
  const colours = mapOf(shown, scale.cyclic);
  const table = new Int32Array(256);
  for (let k = 0; k < 256; k++) {
    let v = (low + (k / 255) * (high - low) - scale.low) / (scale.high - scale.low);
    if (scale.cyclic) v -= Math.floor(v);
    table[k] = word(...colours(Math.min(1, Math.max(0, v))));
  }
  const canvas = filled(use, rows, cols, (out) => {
    for (let k = 0; k < out.length; k++) if (c.codes[2 * k + 1] !== 0) out[k] = table[c.codes[2 * k]];
  });
  return { canvas, steps: [stepX, stepY] };
}

const STATE_COLOURS = [word(...rgbOf(STYLE.insulating)), word(...rgbOf(STYLE.metallic))];

function statesImage(frame: Frame, use: string): Painted {
  const canvas = filled(use, frame.rows, frame.cols, (out) => {
    for (let k = 0; k < out.length; k++) if (frame.states[k] <= 1) out[k] = STATE_COLOURS[frame.states[k]];
  });
  return { canvas, steps: [1, 1] };
}
