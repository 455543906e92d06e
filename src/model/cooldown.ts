import type { PixelSize, Raster } from "./raster.js";

export type Branch = "cooling" | "warming";
export type ChannelName = "topography" | "amplitude" | "phase";
export const CHANNELS: readonly ChannelName[] = ["topography", "amplitude", "phase"];

/** Where one image of one frame lies. Plain data: it travels to worker threads. */
export interface ChannelSource {
  /** Absolute path of the file. */
  readonly file: string;
  /** As the user wrote it, for messages (`cooling_phase.tif#3`). */
  readonly label: string;
  readonly format: "tiff" | "npy";
  /** Page of a stack, from 0. */
  readonly page: number;
  /** Multiply the file's values by this to get nm (topography) or rad (phase); 1 for amplitude. */
  readonly scale: number;
}

/** One scan at one temperature, not yet loaded. */
export interface FrameInfo {
  /** Index in the cooldown, from 0, in the order of the YAML file. */
  readonly frame: number;
  /** Index of its series in the YAML file, from 0. */
  readonly series: number;
  readonly branch: Branch;
  /** From 1. */
  readonly cycle: number;
  readonly temperatureK: number;
  readonly startedAt: string | null;
  readonly endedAt: string | null;
  /** Where the scan window was sent, growing along +x and +y; a first guess of the drift. */
  readonly stageXNm: number | null;
  readonly stageYNm: number | null;
  readonly rows: number;
  readonly cols: number;
  readonly sources: Partial<Record<ChannelName, ChannelSource>> & { readonly amplitude: ChannelSource };
}

/** Resolution of the tip: full width at half maximum of its point response. */
export interface Tip {
  readonly resolutionNm: number;
  /** 0 where the user gave none. */
  readonly resolutionSdNm: number;
}

export interface SourceFile {
  /** Relative to the YAML file where it lies below it. */
  readonly path: string;
  readonly sha256: string;
  readonly bytes: number;
}

/** Something the user must be told at the end of a run; never a reason to stop. */
export interface Notice {
  /** Frame index, or null for the whole cooldown. */
  readonly frame: number | null;
  /** Short code, kebab-case: `drift-failed`, `clipped-channel`. */
  readonly code: string;
  readonly message: string;
}

/** One thermal run as described by its `cooldown.yaml`, checked, in nm, K and rad. Plain data. */
export interface Cooldown {
  readonly yamlFile: string;
  readonly sample: string;
  readonly cooldown: string;
  readonly region: string | null;
  readonly pixel: PixelSize;
  readonly tip: Tip | null;
  readonly photonEnergyMeV: number | null;
  readonly filmThicknessNm: number | null;
  readonly amplitudeUnit: string;
  readonly frames: readonly FrameInfo[];
  readonly sources: readonly SourceFile[];
  readonly notices: readonly Notice[];
}

/** One frame's channels as read, in nm (topography), the file's unit (amplitude), rad (phase). */
export interface RawFrame {
  readonly frame: number;
  readonly topography: Raster | null;
  readonly amplitude: Raster;
  readonly phase: Raster | null;
}
