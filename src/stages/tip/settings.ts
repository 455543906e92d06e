import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  widthNm: {
    default: 0,
    unit: "nm",
    means: "how far across the line pixels are used; 0 = twice the resolution expected, at least 4 pixels",
    min: 0,
  },
  expectedNm: {
    default: 0,
    unit: "nm",
    means: "resolution expected, for the length of lines that are proposed; 0 = 4 pixels",
    min: 0,
  },
  leastPixels: { default: 30, unit: "1", means: "pixels below which no width is fitted", min: 12 },
  leastEvidence: {
    default: 25,
    unit: "1",
    means:
      "by how much chi-square (less the price of the parameters) must fall against a plane for a feature to be there",
    min: 0,
  },
  testSigmas: {
    default: 3.3,
    unit: "1",
    means: "standard deviations from which a departure of the shape is reported (3.3: one good feature in a thousand)",
    min: 2,
  },
  reliefNm: {
    default: 1,
    unit: "nm",
    means: "height step under the feature from which an edge artefact is suspected",
    min: 0,
  },
  separableShare: {
    default: 0.25,
    unit: "1",
    means:
      "largest half-width of the interval, as a share of the resolution, with which a particle's own size counts as separated from the tip's",
    min: 0.02,
    max: 1,
  },
  leastContrast: {
    default: 6,
    unit: "1",
    means: "contrast over pixel noise from which a feature is a candidate of the search",
    min: 2,
  },
} as const satisfies SettingTable;

export type TipSettings = SettingValues<typeof settings>;
