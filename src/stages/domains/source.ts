import type { DomainRegion, FrameDomains } from "../../model/domains.js";
import type { Placed } from "./overlap.js";

/** The labelled frames of a cooldown, in order; given as a function so that no more than a few need be in memory at once. */
export interface FrameSource {
  readonly count: number;
  readonly at: (index: number) => FrameDomains;
}

/** One frame that takes part in the tracking. */
export interface PlacedFrame {
  readonly index: number;
  readonly frame: number;
  readonly at: Placed;
  readonly regions: readonly DomainRegion[];
}
