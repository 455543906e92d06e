import type { DecidedFringe } from "../../model/analysis.js";
import type { FringeTest } from "../../model/walls.js";
import { benjaminiHochberg } from "../../numerics/false_discovery.js";
import type { FringeSettings } from "./settings.js";

/** Which tests of a cooldown hold a fringe, with the false discovery rate held at `falseDiscoveryRate` over all of them
 *  (Benjamini & Hochberg 1995, J. R. Stat. Soc. B 57, 289; holds under positive dependence). Give all tests of the cooldown at once. */
export function controlFalseDiscovery(tests: readonly FringeTest[], s: FringeSettings): DecidedFringe[] {
  const adjusted = benjaminiHochberg(tests.map((t) => t.pValue));
  return tests.map((t, k) => ({ ...t, adjustedP: adjusted[k], detected: adjusted[k] <= s.falseDiscoveryRate }));
}

/** Detected share of the tested wall length; null where nothing was tested. */
export function fringeShare(tests: readonly DecidedFringe[]): number | null {
  let all = 0;
  let found = 0;
  for (const t of tests) {
    const length = t.arcToNm - t.arcFromNm;
    all += length;
    if (t.detected) found += length;
  }
  return all > 0 ? found / all : null;
}
