import type { Condition } from "./conditions.js";
import { errorsOf, rms, type Estimate, type Score } from "./score.js";
import { summarise } from "./table.js";

/** One line of what the estimates must hold, with what the study has found. */
export interface Promised {
  readonly what: string;
  readonly goal: string;
  readonly found: string;
  readonly holds: boolean;
}

interface Result {
  readonly condition: Condition;
  readonly scores: readonly Score[];
}

const pct = (v: number, digits = 1): string => `${(100 * v).toFixed(digits)} %`;
const within = (v: number, low: number, high: number): boolean => v >= low && v <= high;

/** Share of estimates whose 95 % interval (from their standard deviation) holds the truth. */
function coverageBySd(e: readonly Estimate[]): number {
  const told = e.filter((v) => v.sd !== null && v.sd > 0);
  return told.filter((v) => Math.abs(v.error) <= 1.96 * (v.sd ?? 0)).length / told.length;
}

/** The requirements over all conditions that were run; a line whose conditions were not run is left out. */
export function promised(results: readonly Result[]): Promised[] {
  const all = results.flatMap((r) => r.scores);
  const of = (...names: string[]): Score[] =>
    results.filter((r) => names.includes(r.condition.name)).flatMap((r) => r.scores);
  const without = (...names: string[]): Score[] =>
    results.filter((r) => !names.includes(r.condition.name)).flatMap((r) => r.scores);
  const sum = (s: readonly Score[], pick: (x: Score) => number): number => s.reduce((t, x) => t + pick(x), 0);
  const out: Promised[] = [];
  const say = (n: number, what: string, goal: string, found: string, holds: boolean): void => {
    if (n > 0) out.push({ what, goal, found: `${found} (${n})`, holds });
  };

  const drift = all.flatMap((s) => s.driftPx);
  const pulls = drift.flatMap((v) => (v.sd !== null && v.sd > 0 ? [v.error / v.sd] : []));
  const worst = Math.max(...errorsOf(drift).map(Math.abs));
  say(drift.length, "drift: largest error of an axis", "0.1 px", `${worst.toFixed(3)} px`, worst <= 0.1);
  say(drift.length, "drift: error / sd, rms", "0.8–1.25", rms(pulls).toFixed(2), within(rms(pulls), 0.8, 1.25));

  const fraction = summarise(all.flatMap((s) => s.mixedFraction));
  say(fraction.n, "metallic fraction: bias", "0.003", fraction.bias.toFixed(4), Math.abs(fraction.bias) <= 0.003);
  say(
    fraction.n,
    "metallic fraction: 95 % intervals hold",
    "92–98 %",
    pct(fraction.coverage),
    within(fraction.coverage, 0.92, 0.98),
  );

  const single = sum(all, (s) => s.singleStateFrames);
  const wrong = sum(all, (s) => s.singleStateWrong);
  const profiles = sum(all, (s) => s.singleStateProfiles);
  say(
    single,
    "frames of one state: fraction not 0 or 1; profiles",
    "0; 0",
    `${wrong}; ${profiles}`,
    wrong + profiles === 0,
  );

  const half = summarise(all.flatMap((s) => s.halfK.map((e) => ({ ...e, error: e.error / s.stepK }))));
  say(half.n, "half temperatures: bias, steps", "0.1", half.bias.toFixed(3), Math.abs(half.bias) <= 0.1);
  say(half.n, "half temperatures: 95 % intervals hold", "≥ 93 %", pct(half.coverage), half.coverage >= 0.93);
  const loop = summarise(all.flatMap((s) => s.widthK));
  say(loop.n, "loop widths: 95 % intervals hold", "≥ 93 %", pct(loop.coverage), loop.coverage >= 0.93);

  const width = summarise(without("half-tip", "sharp").flatMap((s) => s.profileWidth));
  say(width.n, "wall widths, 1 to 8 tips: bias", "2 %", pct(width.bias), Math.abs(width.bias) <= 0.02);
  say(width.n, "wall widths: error / sd, mean", "±0.15", width.pullMean.toFixed(2), Math.abs(width.pullMean) <= 0.15);
  say(width.n, "wall widths: error / sd, sd", "0.85–1.15", width.pullSd.toFixed(2), within(width.pullSd, 0.85, 1.15));
  const halfTip = summarise(of("half-tip").flatMap((s) => s.medianWidth));
  say(
    halfTip.n,
    "walls of half a tip: bias of the frames' medians",
    "5 %",
    pct(halfTip.bias),
    Math.abs(halfTip.bias) <= 0.05,
  );
  const sharp = of("sharp");
  const sound = sum(sharp, (s) => s.profiles - s.flagged);
  const resolved = 1 - sum(sharp, (s) => s.unresolved) / sound;
  say(sound, "walls of no width called resolved", "≤ 6 %", pct(resolved), resolved <= 0.06);
  const limited = of("half-tip", "narrow");
  const limits = sum(limited, (s) => s.profiles - s.flagged);
  const held = sum(limited, (s) => s.upperHolds) / limits;
  say(limits, "upper limits of narrow walls hold", "94–99 %", pct(held), within(held, 0.94, 0.99));

  const plain = without("fringes", "weak-fringes", "slow-fringes");
  const tested = sum(plain, (s) => s.fringesTested);
  const called = sum(plain, (s) => s.fringesDetected);
  say(
    tested,
    `fringes called where there are none, ${plain.length} cooldowns`,
    "≤ 5 %",
    pct(called / tested),
    called <= 0.05 * tested,
  );
  const fringed = of("fringes", "weak-fringes", "slow-fringes");
  const beside = sum(fringed, (s) => s.fringesTested);
  const found = sum(fringed, (s) => s.fringesDetected);
  say(beside, "fringes found", "≥ 90 %", pct(found / beside), found >= 0.9 * beside);
  for (const [name, pick] of [
    ["period", (s: Score) => s.period],
    ["decay", (s: Score) => s.decay],
  ] as const) {
    const e = fringed.flatMap(pick);
    const got = summarise(e);
    say(got.n, `fringes: ${name}, bias`, "10 %", pct(got.bias), Math.abs(got.bias) <= 0.1);
    say(
      got.n,
      `fringes: ${name}, 95 % intervals hold`,
      "90–98 %",
      pct(coverageBySd(e)),
      within(coverageBySd(e), 0.9, 0.98),
    );
  }

  const events = all.flatMap((s) => (s.events === null ? [] : [s.events]));
  const fine = of("fine-steps", "fine-small").flatMap((s) => (s.events === null ? [] : [s.events]));
  const share = (a: number, b: number): string => (b > 0 ? `${pct(a / b, 0)} of ${b}` : "none");
  for (const [name, list] of [
    ["all steps of temperature", events],
    ["steps of 1.5 K", fine],
  ] as const) {
    const [known, hit, told, right, knownInDoubt, toldInDoubt] = (
      ["known", "found", "told", "right", "knownUndecidable", "toldUndecidable"] as const
    ).map((k) => list.reduce((t, e) => t + e[k], 0));
    say(
      list.length,
      `births, deaths, splits, merges, ${name}: found; right`,
      "≥ 95 %",
      `${share(hit, known)}, ${knownInDoubt} more undecidable; ${share(right, told)}, ${toldInDoubt} more undecidable`,
      hit >= 0.95 * known && right >= 0.95 * told,
    );
  }
  return out;
}

/** As a table in Markdown. */
export function promisedTable(results: readonly Result[]): string {
  return [
    "| what, over all conditions | must hold | found (number of estimates) | |",
    "| --- | --- | --- | --- |",
    ...promised(results).map((p) => `| ${p.what} | ${p.goal} | ${p.found} | ${p.holds ? "holds" : "**not held**"} |`),
  ].join("\n");
}
