import type { ChannelName } from "../model/cooldown.js";
import type { TableHead } from "./codec.js";
import type { CooldownInfo, PreviewData, ReportTable, ScaleData } from "./data.js";

/* The part of the page that is read at once: everything but the long lists of numbers and the images, which stand in numbered chunks. */

/** Number of a chunk; its element is `chunk-N`, its text base64. */
export type ChunkNumber = number;

export interface PreviewHead extends Omit<PreviewData, "image"> {
  readonly chunk: ChunkNumber;
}

export interface FrameHead {
  readonly frame: number;
  readonly rows: number;
  readonly cols: number;
  /** Deflated bytes. */
  readonly states: ChunkNumber;
  /** Deflated little-endian 16-bit numbers; null where domains cannot be told apart in the map. */
  readonly domains: ChunkNumber | null;
  readonly previews: readonly PreviewHead[];
  /** Deflated, in the frame codec. */
  readonly walls: ChunkNumber;
  readonly profileBins: ChunkNumber;
  readonly fringeBins: ChunkNumber;
}

export interface CooldownIndex {
  readonly info: CooldownInfo;
  readonly tables: Readonly<Record<ReportTable, { readonly head: TableHead; readonly chunk: ChunkNumber }>>;
  readonly scales: Readonly<Partial<Record<ChannelName, ScaleData>>>;
  readonly frames: readonly FrameHead[];
}

export interface ReportIndex {
  readonly programVersion: string;
  readonly cooldowns: readonly CooldownIndex[];
}
