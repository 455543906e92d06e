import type { ChannelName, Cooldown, Notice } from "./cooldown.js";
import type { DomainRegion, TrackedDomain } from "./domains.js";
import type { Loop } from "./loops.js";
import type { DriftPair, Preview, ProfileBins } from "./pictures.js";
import type { Drift, FrameVerdict } from "./signal.js";
import type { FringeTest, Wall, WallProfile, WidthSummary } from "./walls.js";

/** A two-state map packed for keeping: deflated bytes of `DomainMap.states`. */
export interface PackedMap {
  readonly rows: number;
  readonly cols: number;
  readonly deflated: Uint8Array;
}

/** Noise of one frame's pixels as cleaning found it, one standard deviation; null where the channel is missing. */
export interface FrameNoise {
  /** Relative to the amplitude. */
  readonly amplitudeRelative: number;
  readonly phaseRad: number | null;
  readonly topographyNm: number | null;
  /** The channels whose noise comes from trace less retrace; that of the others from differences of neighbours along the row. */
  readonly byRetrace: readonly ChannelName[];
}

export type DecidedFringe = FringeTest & { readonly detected: boolean; readonly adjustedP: number };

/** Everything found in one frame; small, so that the results of a whole cooldown fit in memory. */
export interface FrameResult {
  readonly frame: number;
  /** SHA-256 of the pixel values of its images, by which the frame is known again. */
  readonly imagesSha256: string;
  readonly verdict: FrameVerdict;
  readonly drift: Drift;
  readonly fraction: { readonly value: number; readonly low: number; readonly high: number } | null;
  /** Gain-corrected levels, in the file's unit as scaled in the first frame; null where the state is not in the frame. */
  readonly amplitudeInsulating: number | null;
  readonly amplitudeMetallic: number | null;
  readonly gain: number;
  readonly map: PackedMap;
  readonly regions: readonly DomainRegion[];
  readonly wallLengthNm: number;
  readonly walls: readonly Wall[];
  readonly profiles: readonly WallProfile[];
  readonly widths: WidthSummary;
  readonly fringes: readonly DecidedFringe[];
  readonly fringeShare: number | null;
  readonly usablePixels: number;
  readonly debrisPixels: number;
  readonly scarPixels: number;
  readonly noise?: FrameNoise;
  /** For drawing; read from disk each time they are asked for. */
  readonly previews?: readonly Preview[];
  readonly profileBins?: readonly ProfileBins[];
}

export type SettingRecord = Readonly<Record<string, number | string | boolean>>;

/** The whole analysis of one cooldown, as the store keeps it. */
export interface Analysis {
  readonly cooldown: Cooldown;
  readonly programVersion: string;
  /** Full set of settings used, defaults included, by dotted name. */
  readonly settings: SettingRecord;
  readonly frames: readonly FrameResult[];
  readonly domains: readonly TrackedDomain[];
  readonly loops: readonly Loop[];
  readonly notices: readonly Notice[];
  /** Every pair of frames that was compared with success, for drawing. */
  readonly driftPairs?: readonly DriftPair[];
  /** Removes what waits on disk to be stored: previews and bins cannot be read after that. Absent: nothing waits. The end of the process
   *  removes it too. */
  readonly release?: () => void;
}
