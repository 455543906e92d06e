export { type CleanReport, cleanFrame } from "./clean_frame.js";
export { type CleanSettings, settings as cleanSettings } from "./settings.js";
