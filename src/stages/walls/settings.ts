import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  spacingNm: {
    default: 0,
    unit: "nm",
    means: "length of wall that one profile is fitted to; 0 = twice the tip resolution (6 pixels without one)",
    min: 0,
  },
  reachNm: {
    default: 0,
    unit: "nm",
    means: "how far from the wall pixels enter a fit; 0 = from the apparent width",
    min: 0,
  },
  reachWidths: {
    default: 2,
    unit: "1",
    means: "the same in apparent widths, where reachNm is 0",
    min: 1,
    max: 5,
  },
  geometryBlurNm: {
    default: -1,
    unit: "nm",
    means:
      "standard deviation of the blur before walls are traced (fits never see it); -1 = as much as the noise asks for",
    min: -1,
  },
  lineSmoothingPx: {
    default: 1,
    unit: "px",
    means: "standard deviation of the smoothing along a traced wall",
    min: 0,
    max: 10,
  },
  lengthExcess: {
    default: 0.001,
    unit: "1",
    means: "by how much noise may lengthen a wall, as a share; sets the blur before tracing",
    min: 0.0001,
    max: 0.1,
  },
  leastPixels: {
    default: 24,
    unit: "1",
    means: "pixels below which a profile is flagged few-pixels",
    min: 8,
  },
  fringeAlarm: {
    default: 0.001,
    unit: "1",
    means:
      "p-value of structure across the line between the two levels below which a wall is fitted along the radial direction, which a fringe does not bend",
    min: 0,
    max: 1,
  },
  draws: {
    default: 400,
    unit: "1",
    means: "bootstrap draws for the interval of a frame's median width",
    min: 50,
  },
} as const satisfies SettingTable;

export type WallsSettings = SettingValues<typeof settings>;
