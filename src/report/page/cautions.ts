/** What a reader of the numbers has to know. */
export const LIMITS: readonly string[] = [
  "A width is intrinsic only with a stated tip resolution, and as good as that resolution and its Gaussian shape; without one, widths are upper limits.",
  "The interval of a metallic fraction is about this field of view, not about the whole sample.",
  "Domains smaller than the tip's resolution vanish; walls nearer to each other than about two apparent widths are flagged.",
  "A fringe's period is reported as measured; whether it is a whole wavelength or half of one depends on what launches the wave.",
  "Images do not show heating by the light, offsets of the sensor or thermal lag: temperatures are as they were given.",
  "The images on this page are small copies made at ingest; numbers come from the full frames.",
];

export const CAUTIONS: readonly string[] = [
  "The program only analyses files; nothing here is an instruction to an instrument.",
  "Cryogens can suffocate, burn by cold and burst closed vessels; vacuum windows can implode; infrared lasers are invisible and blind. Work on them is for people trained and licensed for it.",
];
