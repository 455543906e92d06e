import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  levelDegree: {
    default: 2,
    unit: "1",
    means: "degree of the polynomial levelled off the topography; higher ones would eat relief",
    min: 0,
    max: 2,
  },
  correctRows: {
    default: true,
    unit: "",
    means: "take the offsets of single rows off topography and phase, and their gains off the amplitude",
  },
  leastRowPixels: {
    default: 12,
    unit: "1",
    means: "two rows are compared only over at least this many pixels of one state",
    min: 4,
  },
  scarSigmas: {
    default: 4.5,
    unit: "1",
    means: "a scar departs from the rows above and below by this many standard deviations of the noise",
    min: 2.5,
  },
  scarLeastPixels: { default: 3, unit: "1", means: "shortest run along a row that can be a scar", min: 2 },
  badFrameScarShare: {
    default: 0.02,
    unit: "1",
    means: "a frame with a larger share of scarred pixels is reported",
    min: 0,
    max: 1,
  },
} as const satisfies SettingTable;

export type CleanSettings = SettingValues<typeof settings>;
