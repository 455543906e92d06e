import type { PixelSize, Raster } from "./raster.js";

export type Branch = "cooling" | "warming";
export type ChannelName = "topography" | "amplitude" | "phase";
export const CHANNELS: readonly ChannelName[] = ["topography", "amplitude", "phase"];

/** One image in a file. */
export interface ImagePlace {
  /** Absolute path of the file. */
  readonly file: string;
  /** As the user wrote it, for messages (`cooling_phase.tif#3`). */
  readonly label: string;
  readonly format: "tiff" | "npy" | "hdf5" | "text";
  /** Page of a stack, from 0. */
  readonly page: number;
  /** Path of the dataset inside an HDF5 file. */
  readonly dataset?: string;
  /** Which value of a pixel, from 0, where a TIFF holds several. */
  readonly sample?: number;
}

/** Where one image of one frame lies. Plain data: it travels to worker threads. */
export interface ChannelSource extends ImagePlace {
  /** Multiply the file's values by this to get nm (topography) or rad (phase); 1 for amplitude. */
  readonly scale: number;
  /** Set where the image is the modulus (amplitude) or the argument (phase) of a complex signal: of the file's own complex numbers, or
   *  of the file as the real part with `imaginary`. */
  readonly complex?: "modulus" | "argument";
  readonly imaginary?: ImagePlace;
  /** The same scan lines on the tip's way back. */
  readonly retrace?: ImagePlace;
}

/** A rectangle of one frame that the user leaves out, edges included, in the frame's own nm (x = column · pixel, y = row · pixel). */
export interface ExcludedRegion {
  readonly x0Nm: number;
  readonly y0Nm: number;
  readonly x1Nm: number;
  readonly y1Nm: number;
  readonly reason: string;
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
  /** From the thermometry log, null or absent without one: spread over the scan (one standard deviation, time-weighted), slope, and
   *  what the lag of the sample behind the sensor added to `temperatureK`. */
  readonly temperatureSdK?: number | null;
  readonly rampKPerS?: number | null;
  readonly lagShiftK?: number | null;
  readonly startedAt: string | null;
  readonly endedAt: string | null;
  /** Where the scan window was sent, growing along +x and +y; a first guess of the drift. */
  readonly stageXNm: number | null;
  readonly stageYNm: number | null;
  readonly rows: number;
  readonly cols: number;
  readonly sources: Partial<Record<ChannelName, ChannelSource>> & { readonly amplitude: ChannelSource };
  /** Why the user leaves the whole frame out: it keeps its place and counts as not measured. */
  readonly excluded?: string;
  readonly excludedRegions?: readonly ExcludedRegion[];
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
  /** Parts of the message, in their order there, in which the same remark on another frame may differ: names of files, numbers. */
  readonly varies?: readonly string[];
}

/** Codes of the notices that ask the user to look at the input again: what comes of it as it stands is most likely not what was meant. */
export const WARNINGS: ReadonlySet<string> = new Set(["branch-contrary", "fraction-not-rising", "tip-below-pixel"]);

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
  /** Harmonic of the tip's frequency at which the signal was demodulated, where the user says so. */
  readonly amplitudeHarmonic?: number | null;
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
  /** Noise of a channel averaged over trace and retrace, one standard deviation a pixel, from their difference less what whole rows
   *  differ by (nm, file's unit, rad). */
  readonly retraceNoise?: Partial<Record<ChannelName, number>>;
  /** What was found while reading. */
  readonly notices?: readonly Notice[];
}
