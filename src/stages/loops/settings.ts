import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  draws: {
    default: 4000,
    unit: "1",
    means: "simulated repetitions behind the intervals of half temperatures and widths",
    min: 200,
  },
  leastFractionSd: {
    default: 0.001,
    unit: "1",
    means: "no metallic fraction is taken to be known better than this (1 sd)",
    min: 1e-6,
  },
  completeLow: {
    default: 0.02,
    unit: "1",
    means: "a branch is complete only if its metallic fraction falls to this",
    min: 0,
    max: 0.5,
  },
  completeHigh: { default: 0.98, unit: "1", means: "… and rises to this", min: 0.5, max: 1 },
  fallSd: {
    default: 6,
    unit: "1",
    means: "a fraction that falls with rising temperature by so many standard deviations is warned of",
    min: 3,
  },
  leastFall: { default: 0.05, unit: "1", means: "… if it falls by this much too", min: 0, max: 1 },
  gapSmoothness: {
    default: 0.7,
    unit: "1",
    means:
      "how evenly the fraction is taken to change between two temperatures: 0 = it may jump anywhere inside, large = a straight line; 0.7 suits ten domains or more in the field",
    min: 0,
  },
} as const satisfies SettingTable;

export type LoopsSettings = SettingValues<typeof settings>;
