import { must, num, word, type Row } from "../../figures/rows.js";
import type { ChannelName } from "../../model/cooldown.js";
import type { ProfileBinsData, FringeBinsData, WallData } from "../data.js";
import { decodeFringes, decodeProfiles, decodeWalls } from "../frame_codec.js";
import type { PreviewHead } from "../index_data.js";
import { chunk, inflate, type Cooldown } from "./cooldown.js";

/** A channel of a frame as codes, and what they stand for. */
export interface Channel {
  readonly head: PreviewHead;
  /** Code and alpha in turn, row-major. */
  readonly codes: Uint8Array;
}

/** A wall with the length along it at each of its points. */
export interface Wall extends WallData {
  readonly arcNm: Float32Array;
}

/** One frame unpacked. */
export interface Frame {
  readonly frame: number;
  readonly rows: number;
  readonly cols: number;
  readonly channels: Partial<Record<ChannelName, Channel>>;
  readonly states: Uint8Array;
  readonly domains: Uint16Array | null;
  readonly walls: readonly Wall[];
}

/** Frames kept unpacked; a frame of 512 × 512 takes about 1.2 MB. */
const MOST_KEPT = 200;

/** The frames of a cooldown, unpacked one by one and kept, those asked for last where they are too many. */
export class Frames {
  private readonly loading = new Map<number, Promise<Frame>>();
  private readonly ready = new Map<number, Frame>();

  constructor(readonly cooldown: Cooldown) {}

  /** The frame where it is unpacked already. */
  get(frame: number): Frame | null {
    return this.ready.get(frame) ?? null;
  }

  load(frame: number): Promise<Frame> {
    const known = this.loading.get(frame);
    if (known !== undefined) {
      this.loading.delete(frame); // to the end: asked for last
      this.loading.set(frame, known);
      return known;
    }
    const made = this.unpack(frame).then((f) => {
      if (this.loading.has(frame)) this.ready.set(frame, f);
      return f;
    });
    this.loading.set(frame, made);
    for (const old of this.loading.keys()) {
      if (this.loading.size <= MOST_KEPT) break;
      this.loading.delete(old);
      this.ready.delete(old);
    }
    return made;
  }

  /** Unpacks all, nearest first, a moment's work at a time. */
  async loadAll(from: number, after: () => void): Promise<void> {
    const order = this.cooldown.index.frames
      .map((f) => f.frame)
      .sort((a, b) => Math.abs(a - from) - Math.abs(b - from) || a - b)
      .slice(0, MOST_KEPT);
    for (const f of order) {
      if (this.ready.has(f)) continue;
      await this.load(f);
      after();
      await new Promise((r) => setTimeout(r, 0));
    }
  }

  async profileBins(frame: number, wall: number, profile: number): Promise<ProfileBinsData | null> {
    const list = decodeProfiles(await inflate(chunk(this.cooldown.head(frame).profileBins)));
    return list.find((p) => p.wall === wall && p.profile === profile) ?? null;
  }

  async fringeBins(frame: number, wall: number, stretch: number): Promise<FringeBinsData | null> {
    const list = decodeFringes(await inflate(chunk(this.cooldown.head(frame).fringeBins)));
    return list.find((p) => p.wall === wall && p.stretch === stretch) ?? null;
  }

  private async unpack(frame: number): Promise<Frame> {
    const head = this.cooldown.head(frame);
    const [states, domains, walls, ...channels] = await Promise.all([
      inflate(chunk(head.states)),
      head.domains === null ? null : inflate(chunk(head.domains)),
      inflate(chunk(head.walls)),
      ...head.previews.map(async (p): Promise<Channel> => ({ head: p, codes: await codesOf(p) })),
    ]);
    return {
      frame,
      rows: head.rows,
      cols: head.cols,
      channels: Object.fromEntries(channels.map((c) => [c.head.channel, c])),
      states,
      domains: domains === null ? null : new Uint16Array(domains.buffer),
      walls: decodeWalls(walls).map(withArcs),
    };
  }
}

let drawing: CanvasRenderingContext2D | null = null;

/** The codes in a stored image, as they were put in: no colour management, no premultiplied alpha. */
async function codesOf(p: PreviewHead): Promise<Uint8Array> {
  const blob = new Blob([chunk(p.chunk)], { type: "image/webp" });
  const image = await createImageBitmap(blob, { premultiplyAlpha: "none", colorSpaceConversion: "none" });
  drawing ??= document.createElement("canvas").getContext("2d", { willReadFrequently: true });
  if (drawing === null) throw new Error("no canvas");
  drawing.canvas.width = p.cols;
  drawing.canvas.height = p.rows;
  drawing.drawImage(image, 0, 0);
  image.close();
  const { data } = drawing.getImageData(0, 0, p.cols, p.rows);
  const codes = new Uint8Array(2 * p.rows * p.cols);
  for (let k = 0; k < p.rows * p.cols; k++) {
    codes[2 * k] = data[4 * k];
    codes[2 * k + 1] = data[4 * k + 3];
  }
  return codes;
}

function withArcs(w: WallData): Wall {
  const n = w.points.length >> 1;
  const arcNm = new Float32Array(n);
  for (let k = 1; k < n; k++)
    arcNm[k] =
      arcNm[k - 1] + Math.hypot(w.points[2 * k] - w.points[2 * k - 2], w.points[2 * k + 1] - w.points[2 * k - 1]);
  return { ...w, arcNm };
}

/** Stored value of a channel at a place of the frame, nm without drift; null where nothing was measured. */
export function valueAt(c: Channel, xNm: number, yNm: number, pixelXNm: number, pixelYNm: number): number | null {
  const { head } = c;
  const col = Math.floor(Math.round(xNm / pixelXNm) / head.stepX);
  const row = Math.floor(Math.round(yNm / pixelYNm) / head.stepY);
  if (col < 0 || row < 0 || col >= head.cols || row >= head.rows) return null;
  const k = 2 * (row * head.cols + col);
  return c.codes[k + 1] === 0 ? null : head.low + (c.codes[k] / 255) * (head.high - head.low);
}

/** Index of the frame's pixel at a place of the frame, or −1. */
export function pixelAt(f: Frame, xNm: number, yNm: number, pixelXNm: number, pixelYNm: number): number {
  const col = Math.round(xNm / pixelXNm);
  const row = Math.round(yNm / pixelYNm);
  return col < 0 || row < 0 || col >= f.cols || row >= f.rows ? -1 : row * f.cols + col;
}

/** How much a profile's width may be relied on: `sound`, a `limit` only, or `flagged`. */
export function standing(r: Row): "sound" | "limit" | "flagged" {
  if (word(r, "flag") !== "") return "flagged";
  return must(r, "resolved") === 1 && num(r, "width_nm") !== null ? "sound" : "limit";
}
