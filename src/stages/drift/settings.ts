import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  largestJump: {
    default: 0.6,
    unit: "1",
    means: "largest shift searched between two frames, as a share of the frame's side, along either axis",
    min: 0.05,
    max: 0.9,
  },
  leastOverlap: {
    default: 0.25,
    unit: "1",
    means: "least overlap of two frames, as a share of the frame's measured area, at which a shift is believed",
    min: 0.05,
    max: 0.9,
  },
  leastPeak: {
    default: 6,
    unit: "1",
    means: "least height of the correlation peak, in standard deviations of the correlation at other shifts",
    min: 3,
    max: 100,
  },
  peakRatio: {
    default: 0.75,
    unit: "1",
    means: "second highest correlation peak over the highest at which a shift is called ambiguous",
    min: 0.1,
    max: 1,
  },
  leastFeatures: {
    default: 2.5,
    unit: "1",
    means: "number of separate features that must make the correlation; one particle lying on another makes 1",
    min: 1,
    max: 100,
  },
  leastBlurPx: {
    default: 0.8,
    unit: "px",
    means: "least blur (standard deviation) of both frames before the fine step; more is taken where noise asks for it",
    min: 0.5,
    max: 5,
  },
  pairsPerFrame: {
    default: 8,
    unit: "1",
    means: "pairs measured for each frame on average, both rounds together",
    min: 2,
    max: 40,
  },
  enoughPx: {
    default: 0.003,
    unit: "px",
    means:
      "a frame placed to this standard deviation by the first round of pairs (its neighbours, the first frame, the one of the other branch) gets no more",
    min: 0,
    max: 1,
  },
  huber: {
    default: 1.345,
    unit: "1",
    means: "residual of a pair, in its standard deviations, beyond which its weight falls",
    min: 0.5,
    max: 10,
  },
  grossPx: {
    default: 1.5,
    unit: "px",
    means: "disagreement of a pair with all others beyond which (and beyond 6 standard deviations) it is a wrong peak",
    min: 0.2,
    max: 20,
  },
} as const satisfies SettingTable;

export type DriftSettings = SettingValues<typeof settings>;
