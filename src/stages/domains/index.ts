export { labelDomains, leastDomainPixels } from "./label.js";
export type { FrameSource } from "./source.js";
export { trackDomains } from "./track.js";
export { settings, type DomainSettings } from "./settings.js";
