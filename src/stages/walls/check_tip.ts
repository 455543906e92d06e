import type { Notice, Tip } from "../../model/cooldown.js";
import { FWHM_PER_SIGMA, RISE_PER_SIGMA } from "../../model/units.js";
import type { WallProfile } from "../../model/walls.js";
import { normalQuantile } from "../../numerics/erf.js";

/** One-sided normal point that a finding must pass, before the correction for looking at many groups. */
const LEVEL = 0.001;

/** What the widths of a cooldown are not, for want of a tip's resolution or of a phase. */
export function missingForWidths(tip: Tip | null, hasPhase: boolean): Notice[] {
  const notices: Notice[] = [];
  if (tip === null)
    notices.push({
      frame: null,
      code: "no-tip",
      message: "no tip.resolution_nm: apparent widths only, the tip's blur is in them",
    });
  if (!hasPhase) {
    const message = "no phase: widths and fractions from the amplitude alone, widths come out a few per cent small";
    notices.push({ frame: null, code: "no-phase", message });
  }
  return notices;
}

/** Whether walls come out sharper than the stated tip allows. The sharpest wall bounds the tip from above: blur only widens. Groups of
 *  neighbouring profiles are averaged (weights 1/sd²) and compared with the 10–90 width of a blurred step; the stated uncertainty
 *  of the tip counts, and so does the number of groups (Bonferroni). The widths themselves are left as they are. */
export function checkTip(profiles: readonly WallProfile[], tip: Tip | null): Notice[] {
  if (tip === null) return [];
  const step = (RISE_PER_SIGMA * tip.resolutionNm) / FWHM_PER_SIGMA;
  const stepSd = (RISE_PER_SIGMA * tip.resolutionSdNm) / FWHM_PER_SIGMA;
  const groups: { sum: number; weight: number; count: number }[] = [];
  let group = { sum: 0, weight: 0, count: 0 };
  let wall = -1;
  for (const p of profiles) {
    const sd = p.apparentWidthSdNm ?? null;
    if (p.flag !== "" || p.apparentWidthNm === null || sd === null || !(sd > 0)) continue;
    if (p.wall !== wall || group.count >= 8) {
      if (group.count > 0) groups.push(group);
      group = { sum: 0, weight: 0, count: 0 };
      wall = p.wall;
    }
    group.sum += p.apparentWidthNm / (sd * sd);
    group.weight += 1 / (sd * sd);
    group.count++;
  }
  if (group.count > 0) groups.push(group);

  const limit = -normalQuantile(LEVEL / Math.max(1, groups.length));
  let sharper = 0;
  let narrowest = Number.POSITIVE_INFINITY;
  for (const g of groups) {
    const width = g.sum / g.weight;
    const sd = Math.hypot(1 / Math.sqrt(g.weight), stepSd);
    if ((step - width) / sd > limit) {
      sharper += g.count;
      narrowest = Math.min(narrowest, width);
    }
  }
  if (sharper === 0) return [];
  const atMost = (narrowest / RISE_PER_SIGMA) * FWHM_PER_SIGMA;
  return [
    {
      frame: null,
      code: "sharper-than-tip",
      message:
        `${sharper} profiles are sharper than a tip of ${tip.resolutionNm} nm can show (10-90 width ${step.toFixed(1)} nm; seen ` +
        `${narrowest.toFixed(1)} nm, so the tip resolves ${atMost.toFixed(1)} nm or better): ` +
        `the stated resolution is too coarse, or the amplitude alone distorts the wall; widths are too small or called unresolved`,
    },
  ];
}
