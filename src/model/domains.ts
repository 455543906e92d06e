import type { DomainMap } from "./signal.js";

export type StateKind = "metallic" | "insulating";

/** One connected region of one state in one frame. Frame nm. */
export interface DomainRegion {
  /** Label in the frame's label image, from 1. */
  readonly label: number;
  readonly kind: StateKind;
  readonly areaNm2: number;
  /** null where the domain touches the border. */
  readonly perimeterNm: number | null;
  readonly xNm: number;
  readonly yNm: number;
  readonly touchesBorder: boolean;
}

export interface FrameDomains {
  readonly frame: number;
  readonly map: DomainMap;
  /** Row-major label image, 0 = no domain (unusable, or below the least area); labels unique over both kinds. */
  readonly labels: Int32Array;
  readonly regions: readonly DomainRegion[];
}

export type Origin = "first-frame" | "nucleated" | "split" | "border";
export type Fate = "last-frame" | "vanished" | "merged" | "border";

export interface TrackedDomain {
  /** From 0 within the cooldown. */
  readonly domain: number;
  readonly kind: StateKind;
  readonly origin: Origin;
  readonly fate: Fate;
  /** One entry a frame, in order; frames and labels index into `FrameDomains`. */
  readonly appearances: readonly { readonly frame: number; readonly label: number }[];
}
