import type { Row } from "../figures/rows.js";
import type { ChannelName } from "../model/cooldown.js";
import type { Preview } from "../model/pictures.js";

/* What the page holds of each cooldown, as plain data: rows of the exported tables and what figures need, all of it read from the store. */

/** One channel of a frame made small, as it is stored. */
export type PreviewData = Preview;

/** A traced wall; points interleaved x, y in nm of the frame, no drift added. */
export interface WallData {
  readonly wall: number;
  readonly closed: boolean;
  readonly lengthNm: number;
  readonly points: ArrayLike<number>;
}

/** Pixels of a profile in bins: signed distance nm, share of the metallic signal, its sd, in turn; and the fitted curve's two lengths. */
export interface ProfileBinsData {
  readonly wall: number;
  readonly profile: number;
  readonly wNm: number;
  readonly sigmaNm: number;
  readonly bins: ArrayLike<number>;
}

/** The signal beside a tested stretch in bins of eight numbers, as `FringeBins` of the model has them. */
export interface FringeBinsData {
  readonly wall: number;
  readonly stretch: number;
  readonly metallicRe: number;
  readonly metallicIm: number;
  readonly bins: ArrayLike<number>;
}

export interface FrameData {
  readonly frame: number;
  readonly rows: number;
  readonly cols: number;
  /** The two-state map as it is stored, deflated: 0 insulating, 1 metallic, 255 neither. */
  readonly statesDeflated: Uint8Array;
  /** For each pixel of the map the number of its tracked domain plus 1, 0 for none; null where the regions of the map are not those of the rows. */
  readonly domains: Uint16Array | null;
  readonly previews: readonly PreviewData[];
  readonly walls: readonly WallData[];
  readonly profileBins: readonly ProfileBinsData[];
  readonly fringeBins: readonly FringeBinsData[];
}

/** One scale of colours for a channel over all frames. */
export interface ScaleData {
  readonly low: number;
  readonly high: number;
  readonly cyclic: boolean;
}

/** What the user left out: a whole frame where `regionNm` is null, else left, top, right, bottom in nm of the frame. */
export interface ExclusionData {
  readonly frame: number;
  readonly regionNm: readonly [number, number, number, number] | null;
  readonly reason: string;
}

export interface NoticeData {
  readonly frame: number | null;
  readonly code: string;
  readonly message: string;
}

export interface SourceData {
  readonly path: string;
  readonly sha256: string;
  readonly bytes: number;
}

export interface CooldownInfo {
  readonly cooldown: string;
  readonly sample: string;
  readonly region: string | null;
  readonly analysis: number;
  readonly analyses: number;
  readonly madeAt: string;
  readonly programVersion: string;
  readonly pixelXNm: number;
  readonly pixelYNm: number;
  readonly tipResolutionNm: number | null;
  readonly tipResolutionSdNm: number | null;
  readonly amplitudeUnit: string;
  readonly photonEnergyMeV: number | null;
  readonly filmThicknessNm: number | null;
  /** `name=value` of each setting that differs from the program's defaults. */
  readonly changedSettings: readonly string[];
  readonly notices: readonly NoticeData[];
  readonly sources: readonly SourceData[];
  readonly exclusions: readonly ExclusionData[];
}

/** The exported tables that the page holds. */
export const REPORT_TABLES = ["temperature", "walls", "fringes", "domains", "domain-frames", "loops"] as const;
export type ReportTable = (typeof REPORT_TABLES)[number];

export interface CooldownData {
  readonly info: CooldownInfo;
  readonly tables: Readonly<Record<ReportTable, readonly Row[]>>;
  readonly scales: Readonly<Partial<Record<ChannelName, ScaleData>>>;
  readonly frames: readonly FrameData[];
}

export interface ReportData {
  /** Version of the program that writes the page. */
  readonly programVersion: string;
  readonly cooldowns: readonly CooldownData[];
}
