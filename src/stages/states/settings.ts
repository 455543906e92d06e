import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  metallicAmplitude: {
    default: "auto",
    unit: "",
    means:
      "which of the two levels is metallic: `auto` takes the one favoured at high temperature (the higher amplitude where nothing tells)",
    choices: ["auto", "higher", "lower"],
  },
  smoothingTipSigmas: {
    default: 0.7,
    unit: "tip sigma",
    means: "least smoothing of the map that the states are read from (labels only; wall fits use the raw pixels)",
    min: 0,
    max: 1.5,
  },
  smoothingNoise: {
    default: 0.08,
    unit: "1",
    means: "the map is smoothed further, up to one tip sigma, until its noise is this share of the contrast",
    min: 0.01,
    max: 0.3,
  },
  leastSmoothingPx: {
    default: 0.6,
    unit: "px",
    means: "smoothing of the map is never less than this (and, without a tip, starts from here)",
    min: 0,
    max: 3,
  },
  leastDomainNm2: {
    default: 0,
    unit: "nm2",
    means: "domains below this area are not kept; 0 = the tip's area π(FWHM/2)², or `leastDomainPx` where that is more",
    min: 0,
  },
  leastDomainPx: { default: 6, unit: "1", means: "least domain in pixels, whatever the tip", min: 1 },
  leastLoneTips: {
    default: 2,
    unit: "1",
    means: "the only domains of a state in a frame must reach this many least areas together with the largest one",
    min: 1,
  },
  leastSeparation: {
    default: 3,
    unit: "sd",
    means: "two levels nearer than this many standard deviations of the pixel noise are one",
    min: 1,
  },
  leastContrast: {
    default: 0.12,
    unit: "1",
    means: "two levels that differ by less than this share of the larger amplitude are one",
    min: 0.01,
  },
  deltaBic: {
    default: -10,
    unit: "1",
    means: "two states need this much less of the Bayesian information criterion, at the effective number of pixels",
    max: 0,
  },
  leastPurePixels: {
    default: 40,
    unit: "1",
    means: "a frame pins the contrast only with this many pixels of each state far from any wall",
    min: 5,
  },
  refineRows: {
    default: true,
    unit: "",
    means: "take what is left of row gains and row phases off, from pixels of known state",
  },
  gainSd: {
    default: 0.06,
    unit: "1",
    means:
      "how much the gain may be expected to change from frame to frame (1 sd of its logarithm) in telling single-state frames apart; where the frames of both states show more, that is taken",
    min: 0.005,
    max: 1,
  },
  levelSlope: {
    default: 0.15,
    unit: "1",
    means: "how much the levels may change over the temperatures of a cooldown (1 sd of their logarithm)",
    min: 0.01,
    max: 2,
  },
  contrastScatter: {
    default: 0.01,
    unit: "1",
    means: "scatter of the contrast of one frame about its smooth course along temperature (1 sd of its logarithm)",
    min: 0,
    max: 0.2,
  },
  assumedPhaseStepRad: {
    default: 0.5,
    unit: "rad",
    means:
      "step of the optical phase between the states where no phase was recorded: it bends the amplitude across a wall",
    min: 0,
    max: 1.5,
  },
  assumedPhaseStepSdRad: {
    default: 0.25,
    unit: "rad",
    means: "standard deviation of that assumption; it widens the interval of the fraction",
    min: 0,
    max: 1.5,
  },
} as const satisfies SettingTable;

export type StatesSettings = SettingValues<typeof settings>;
