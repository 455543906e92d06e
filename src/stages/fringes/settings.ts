import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  stretchNm: { default: 800, unit: "nm", means: "walls are tested in stretches of about this length", min: 50 },
  leastStretchNm: { default: 200, unit: "nm", means: "shorter walls are not tested", min: 20 },
  reachNm: { default: 600, unit: "nm", means: "largest distance from the wall that enters a test", min: 50 },
  leastReachNm: {
    default: 75,
    unit: "nm",
    means:
      "a stretch is tested only where its pixels reach this far on both sides: else nothing tells on which side a fringe is",
    min: 10,
  },
  leastLevelSdRad: {
    default: 0.002,
    unit: "rad",
    means:
      "by how much the optical phase of a state may differ beside one wall from that of the frame (1 sd), at least; more where the frame shows more",
    min: 0.0001,
  },
  mostLevelSdRad: {
    default: 0.05,
    unit: "rad",
    means: "the same, at most; taken where nothing in the frame tells",
    min: 0.001,
  },
  binNm: {
    default: 0,
    unit: "nm",
    means: "width of the distance bins; 0 = half the tip's standard deviation, at least a pixel",
    min: 0,
  },
  leastPeriodTips: {
    default: 1.5,
    unit: "1",
    means: "shortest period searched, in tip resolutions: shorter ones are blurred away",
    min: 0.5,
  },
  draws: { default: 999, unit: "1", means: "simulated profiles a test", min: 99 },
  falseDiscoveryRate: {
    default: 0.05,
    unit: "1",
    means: "false discovery rate over all tests of a cooldown (Benjamini & Hochberg)",
    min: 0.0001,
    max: 0.5,
  },
  leastPeriods: {
    default: 1.5,
    unit: "1",
    means: "a period is reported only with this many of them within the fitted range",
    min: 0.5,
  },
  largestPeriodError: {
    default: 0.06,
    unit: "1",
    means: "… and only if its standard deviation is at most this share of it",
    min: 0.01,
  },
  largestDecayError: {
    default: 0.12,
    unit: "1",
    means: "a decay length is reported only if its standard deviation is at most this share of it",
    min: 0.01,
  },
} as const satisfies SettingTable;

export type FringeSettings = SettingValues<typeof settings>;
