export { controlFalseDiscovery, fringeShare } from "./control.js";
export { testFringes } from "./fringes.js";
export { settings, type FringeSettings } from "./settings.js";
