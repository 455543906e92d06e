export { prepareTipImage, type TipChannel, type TipFrame } from "./prepare.js";
export { measureTip } from "./measure.js";
export { type TipSettings, settings as tipSettings } from "./settings.js";
export type { ChooseOptions } from "./choose.js";
export type {
  CutLine,
  Place,
  TipImage,
  TipMeasured,
  TipModel,
  TipResult,
  TipWarning,
  WarningCode,
  Width,
} from "./types.js";
export { expectedNmOf, findTipFeatures, lineWidthNm, type TipCandidate, type TipSearch } from "./find.js";
export type { TipTogether } from "./combine.js";
