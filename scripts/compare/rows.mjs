// Rows of the comparison's table: the largest difference found, the largest allowed, and why that much.

/** `difference` > `tolerance` (or not a number) is a breach. `cases` says over how many values it is the largest. */
export function row(what, cases, difference, tolerance, why) {
  return { what, cases, difference, tolerance, why, holds: difference <= tolerance };
}

/** Largest absolute difference of two lists; infinite where they have not the same length, or a value is missing on one side only. */
export function largestDifference(ours, theirs, scale = () => 1) {
  if (ours.length !== theirs.length) return Infinity;
  let worst = 0;
  for (let k = 0; k < ours.length; k++) {
    const a = ours[k];
    const b = theirs[k];
    if (Number.isNaN(a) && (b === null || Number.isNaN(b))) continue;
    if (a === b) continue;
    const d = Math.abs(a - b) / scale(b, k);
    worst = Number.isNaN(d) ? Infinity : Math.max(worst, d);
  }
  return worst;
}

export const largestRelative = (ours, theirs) => largestDifference(ours, theirs, (b) => Math.abs(b));
