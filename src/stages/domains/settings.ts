import type { SettingTable, SettingValues } from "../../model/settings.js";

export const settings = {
  leastAreaNm2: {
    default: 0,
    unit: "nm2",
    means: "regions smaller than this are no domains; 0 = the area of the tip's spot, pi (resolution/2)^2",
    min: 0,
  },
  leastPixels: { default: 6, unit: "1", means: "regions of fewer pixels are never domains, whatever the tip", min: 1 },
  overlapShare: {
    default: 0.5,
    unit: "1",
    means: "two regions of consecutive frames are the same domain if they share this part of the smaller one",
    min: 0.05,
    max: 1,
  },
  coreOverlapPixels: {
    default: 3,
    unit: "1",
    means: "… or if more than this many shared pixels cannot come from misregistration",
    min: 0,
  },
  bandSds: {
    default: 2,
    unit: "1",
    means: "misregistration allowed for: this many standard deviations of the two drifts, and half a pixel",
    min: 0,
  },
  neckNm: {
    default: 0,
    unit: "nm",
    means:
      "a join or a cut narrower than this that lasts one frame is noise; 0 = the walls' apparent width, at least the tip's resolution or 3 pixels",
    min: 0,
  },
} as const satisfies SettingTable;

export type DomainSettings = SettingValues<typeof settings>;
