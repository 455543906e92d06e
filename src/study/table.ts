import type { Condition } from "./conditions.js";
import { errorsOf, largest, rms, type Estimate, type Score } from "./score.js";

/** Mean, scatter, and how true the claimed error is, over many estimates. */
export interface Summary {
  readonly n: number;
  readonly bias: number;
  readonly sd: number;
  /** Mean and sd of error / claimed sd; NaN where no sd is claimed. */
  readonly pullMean: number;
  readonly pullSd: number;
  /** Share of the 95 % intervals that hold the truth; NaN where none is given. */
  readonly coverage: number;
  readonly worst: number;
}

const mean = (v: readonly number[]): number => v.reduce((s, x) => s + x, 0) / v.length;
const sdOf = (v: readonly number[]): number => {
  const m = mean(v);
  return Math.sqrt(v.reduce((s, x) => s + (x - m) ** 2, 0) / Math.max(1, v.length - 1));
};

export function summarise(e: readonly Estimate[]): Summary {
  const errors = errorsOf(e);
  const pulls = e.flatMap((v) => (v.sd !== null && v.sd > 0 ? [v.error / v.sd] : []));
  const covered = e.flatMap((v) => (v.covered === null ? [] : [v.covered ? 1 : 0]));
  return {
    n: e.length,
    bias: mean(errors),
    sd: sdOf(errors),
    pullMean: mean(pulls),
    pullSd: sdOf(pulls),
    coverage: mean(covered),
    worst: largest(e),
  };
}

const f = (v: number, digits: number): string => (Number.isFinite(v) ? v.toFixed(digits) : "");
const pct = (v: number, digits = 1): string => (Number.isFinite(v) ? `${(100 * v).toFixed(digits)}` : "");

/** The study's tables in Markdown: a row a condition. */
export function studyTables(results: readonly { condition: Condition; scores: readonly Score[] }[]): string {
  const all = (s: readonly Score[], pick: (x: Score) => readonly Estimate[]): Summary => summarise(s.flatMap(pick));
  const sum = (s: readonly Score[], pick: (x: Score) => number): number => s.reduce((t, x) => t + pick(x), 0);
  const lines: string[] = [
    "| condition | drift rms / px | worst / px | error/sd rms | fraction of mixed frames: bias | worst | covers / % | half T worst / step | covers / % | one-state frames wrong; profiles |",
    "| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |",
  ];
  for (const { condition, scores } of results) {
    const drift = all(scores, (s) => s.driftPx);
    const pulls = scores.flatMap((s) => s.driftPx).flatMap((v) => (v.sd !== null && v.sd > 0 ? [v.error / v.sd] : []));
    const fraction = all(scores, (s) => s.mixedFraction);
    const half = all(scores, (s) => s.halfK);
    const halfWorst = Math.max(...scores.map((s) => largest(s.halfK) / s.stepK));
    lines.push(
      `| ${condition.name} | ${f(rms(scores.flatMap((s) => errorsOf(s.driftPx))), 3)} | ${f(drift.worst, 2)} | ${f(rms(pulls), 2)} | ` +
        `${f(fraction.bias, 4)} | ${f(fraction.worst, 4)} | ${pct(fraction.coverage, 0)} of ${fraction.n} | ${f(halfWorst, 2)} | ${pct(half.coverage, 0)} of ${half.n} | ` +
        `${sum(scores, (s) => s.singleStateWrong)} of ${sum(scores, (s) => s.singleStateFrames)}; ${sum(scores, (s) => s.singleStateProfiles)} |`,
    );
  }
  lines.push(
    "",
    "| condition | profiles, flagged / % | width bias / % | scatter / % | error/sd mean | sd | unresolved / % | upper limit holds / % | frame median bias / % | covers / % | wall length bias / % |",
    "| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |",
  );
  for (const { condition, scores } of results) {
    const width = all(scores, (s) => s.profileWidth);
    const median = all(scores, (s) => s.medianWidth);
    const length = all(scores, (s) => s.wallLength);
    const profiles = sum(scores, (s) => s.profiles);
    const sound = profiles - sum(scores, (s) => s.flagged);
    lines.push(
      `| ${condition.name} | ${profiles}, ${pct(sum(scores, (s) => s.flagged) / profiles, 0)} | ${pct(width.bias)} | ${pct(width.sd)} | ${f(width.pullMean, 2)} | ${f(width.pullSd, 2)} | ` +
        `${pct(sum(scores, (s) => s.unresolved) / sound, 0)} | ${pct(sum(scores, (s) => s.upperHolds) / sound, 0)} | ${pct(median.bias)} | ${pct(median.coverage, 0)} of ${median.n} | ${pct(length.bias)} |`,
    );
  }
  lines.push(
    "",
    "| condition | fringes found of tested | on the wrong side | period bias / % | error/sd sd | reported | decay bias / % | error/sd sd | reported |",
    "| --- | --- | --- | --- | --- | --- | --- | --- | --- |",
  );
  for (const { condition, scores } of results) {
    const period = all(scores, (s) => s.period);
    const decay = all(scores, (s) => s.decay);
    lines.push(
      `| ${condition.name} | ${sum(scores, (s) => s.fringesDetected)} of ${sum(scores, (s) => s.fringesTested)} | ${sum(scores, (s) => s.fringesWrongSide)} | ` +
        `${pct(period.bias)} | ${f(period.pullSd, 2)} | ${period.n} | ${pct(decay.bias)} | ${f(decay.pullSd, 2)} | ${decay.n} |`,
    );
  }
  return `${lines.join("\n")}\n`;
}
