import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  ringNm: {
    default: 0,
    unit: "nm",
    means:
      "radius of the ring that a pixel is compared with; 0 = 4 tip resolutions, or 12 pixels where there is no tip",
    min: 0,
  },
  heightSigmas: {
    default: 5,
    unit: "1",
    means: "debris in the topography stands this many standard deviations above the film's own roughness",
    min: 2,
  },
  effectSigmas: {
    default: 1,
    unit: "1",
    means:
      "debris in amplitude or phase differs from its surroundings by this many pixel-noise standard deviations on average",
    min: 0.3,
  },
  leastFrames: {
    default: 4,
    unit: "1",
    means: "without a bump in the topography debris must have been looked for in at least this many frames",
    min: 2,
  },
  leastCoverage: {
    default: 0.35,
    unit: "1",
    means: "… and in at least this share of all frames: a few frames of like temperature show the same domains",
    min: 0,
    max: 1,
  },
  leastShare: {
    default: 0.6,
    unit: "1",
    means: "… and have been seen in at least this share of the frames in which its surroundings were of one state",
    min: 0.3,
    max: 1,
  },
  leastPixels: { default: 3, unit: "1", means: "smaller spots are not debris", min: 1 },
  coreShare: {
    default: 1 / 6,
    unit: "1",
    means:
      "a pixel has no state where debris changes its signal by this share of the step between the states (of the level where no frame shows both)",
    min: 0.02,
    max: 1,
  },
  marginTips: {
    default: 0.4,
    unit: "1",
    means:
      "margin around debris that levels and walls are not fitted to, in tip resolutions (of 3 pixels where there is no tip); twice this around bumps whose effect was not seen",
    min: 0,
  },
  loneFrameHeightSigmas: {
    default: 6,
    unit: "1",
    means: "height that counts as debris in a frame that could not be placed, where one topography has to do",
    min: 2,
  },
} as const satisfies SettingTable;

export type DebrisSettings = SettingValues<typeof settings>;
