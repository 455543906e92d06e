import { readFileSync } from "node:fs";
import { join } from "node:path";
import type { Branch } from "../model/cooldown.js";
import type { StateKind } from "../model/domains.js";
import type { CooldownSpec } from "./spec.js";
import type { SeenFringe } from "./fringe_seen.js";
import type { StateLevels } from "./wall_profile.js";

/** What is true of one frame, small enough to keep as text. */
export interface FrameTruth {
  readonly frame: number;
  readonly branch: Branch;
  readonly cycle: number;
  readonly temperatureK: number;
  /** A pixel lies at x = column · pixel + driftXNm in the cooldown's coordinates; 0 in the first frame. */
  readonly driftXNm: number;
  readonly driftYNm: number;
  /** Gain relative to the first frame. */
  readonly gain: number;
  /** Metallic share of the sharp, noise-free map: of the measured pixels, and of those that are free of debris too. */
  readonly metallicFraction: number;
  readonly metallicFractionClean: number;
  /** The one state that all measured pixels show; null where both do. */
  readonly singleState: StateKind | null;
  /** 10–90 % rise of the intrinsic profile. */
  readonly widthNm: number;
  /** Length of all walls between measured pixels' centres, under debris too; and free of debris. */
  readonly wallLengthNm: number;
  readonly wallLengthCleanNm: number;
  /** Before gain, that is in the scale of the first frame. */
  readonly levels: StateLevels;
  /** The fringe as the tip sees it beside a straight wall; null where there is none. */
  readonly fringe: SeenFringe | null;
  /** Domains of at least `leastAreaNm2` on the measured pixels: metallic ones join over 8 neighbours, insulating ones over 4. */
  readonly metallicDomains: number;
  readonly insulatingDomains: number;
  readonly scars: number;
  readonly unmeasuredPixels: number;
}

/** What is true of one cycle: where the metallic fraction of the field of view crosses one half. */
export interface CycleTruth {
  readonly cycle: number;
  /** The field of view moves from frame to frame; between frames it is taken to move in a straight line with temperature. */
  readonly coolingHalfK: number | null;
  readonly warmingHalfK: number | null;
  readonly widthK: number | null;
}

export interface CooldownTruth {
  readonly sample: string;
  readonly cooldown: string;
  readonly spec: CooldownSpec;
  readonly leastAreaNm2: number;
  readonly hasFringes: boolean;
  readonly frames: readonly FrameTruth[];
  readonly cycles: readonly CycleTruth[];
}

/** Where a generated cooldown keeps its truth, relative to its folder. */
export const TRUTH_FILE = join("truth", "truth.json");

const isTruth = (v: unknown): v is CooldownTruth =>
  typeof v === "object" && v !== null && "spec" in v && "cycles" in v && "frames" in v && Array.isArray(v.frames);

/** The truth behind a generated cooldown, from the folder that holds its `cooldown.yaml`. Throws where there is none. */
export function readTruth(cooldownDir: string): CooldownTruth {
  const file = join(cooldownDir, TRUTH_FILE);
  const read: unknown = JSON.parse(readFileSync(file, "utf8"));
  if (!isTruth(read)) throw new Error(`${file}: not the truth of a generated cooldown`);
  return read;
}
