// What a score says, in the same words for whoever made the tables.
const errors = (list) => list.map((e) => e.error);
const rms = (v) => Math.sqrt(v.reduce((s, x) => s + x * x, 0) / Math.max(1, v.length));
const worst = (v) => v.reduce((m, x) => Math.max(m, Math.abs(x)), 0);
const median = (v) => [...v].sort((a, b) => a - b)[v.length >> 1] ?? Number.NaN;
const percent = (x, digits = 1) => (100 * x).toFixed(digits);

/** [what, found] in a fixed order. */
export function accuracyOf(score) {
  const drift = errors(score.driftPx);
  const widths = errors(score.profileWidth);
  const bias = median(widths);
  const scatter = 1.4826 * median(widths.map((v) => Math.abs(v - bias)));
  const pulls = score.profileWidth.filter((e) => e.sd > 0).map((e) => e.error / e.sd);
  return [
    ["drift, rms (largest) / px", `${rms(drift).toFixed(3)} (${worst(drift).toFixed(3)})`],
    ["frames not placed", score.framesNotPlaced],
    ["metallic fraction, largest error", worst(errors(score.fraction)).toFixed(4)],
    ["half temperatures, largest error / K", worst(errors(score.halfK)).toFixed(2)],
    [
      "frame's median width, median (largest) / %",
      `${percent(median(errors(score.medianWidth)))} (${percent(worst(errors(score.medianWidth)))})`,
    ],
    ["width of a profile, bias ± scatter / %", `${percent(bias)} ± ${percent(scatter)}`],
    ["its error over its sd, rms", rms(pulls).toFixed(2)],
    ["profiles (flagged)", `${score.profiles} (${score.flagged})`],
    ["one-state frames wrong, of", `${score.singleStateWrong} of ${score.singleStateFrames}`],
    ["fringes found, of stretches tested", `${score.fringesDetected} of ${score.fringesTested}`],
    ["intervals given (fraction, loop, limits)", score.fraction.some((e) => e.covered !== null) ? "yes" : "no"],
  ];
}
