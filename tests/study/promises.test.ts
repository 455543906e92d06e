import { expect, test } from "vitest";
import { CONDITIONS } from "../../src/study/conditions.js";
import { promised } from "../../src/study/promises.js";
import type { Estimate, Score } from "../../src/study/score.js";

const estimate = (error: number, sd: number | null, covered: boolean | null): Estimate => ({ error, sd, covered });

/** A cooldown with nothing in it but what is given. */
function score(part: Partial<Score>): Score {
  return {
    driftPx: [],
    framesNotPlaced: 0,
    fraction: [],
    mixedFraction: [],
    framesUndecided: 0,
    singleStateFrames: 0,
    singleStateWrong: 0,
    singleStateProfiles: 0,
    halfK: [],
    widthK: [],
    stepK: 5,
    medianWidth: [],
    profileWidth: [],
    profiles: 0,
    flagged: 0,
    unresolved: 0,
    upperHolds: 0,
    wallLength: [],
    fringesTested: 0,
    fringesDetected: 0,
    fringesWrongSide: 0,
    period: [],
    decay: [],
    events: null,
    ...part,
  };
}

const usual = CONDITIONS[0];
const of = (part: Partial<Score>): Map<string, boolean> =>
  new Map(promised([{ condition: usual, scores: [score(part)] }]).map((p) => [p.what, p.holds]));

test("a requirement holds or does not by the estimates, and is left out where there is none", () => {
  expect(of({}).size).toBe(0);
  const driftPx = [estimate(0.01, 0.01, null), estimate(-0.01, 0.01, null)];
  expect(of({ driftPx }).get("drift: largest error of an axis")).toBe(true);
  expect(of({ driftPx }).get("drift: error / sd, rms")).toBe(true);
  expect(of({ driftPx: [estimate(0.2, 0.01, null)] }).get("drift: largest error of an axis")).toBe(false);
  expect(of({ driftPx: [estimate(0.02, 0.01, null)] }).get("drift: error / sd, rms")).toBe(false);
  // 19 of 20 intervals hold: 95 %; 17 of 20: 85 %
  const halves = (held: number): Estimate[] => Array.from({ length: 20 }, (_, k) => estimate(0, null, k < held));
  expect(of({ halfK: halves(19) }).get("half temperatures: 95 % intervals hold")).toBe(true);
  expect(of({ halfK: halves(17) }).get("half temperatures: 95 % intervals hold")).toBe(false);
  // an error of 1 K is a fifth of a step of 5 K
  expect(of({ halfK: [estimate(1, null, true)] }).get("half temperatures: bias, steps")).toBe(false);
});

test("a fringe called where there is none, a wall in a frame of one state, and an event that never was, all count", () => {
  const none = "fringes called where there are none, 1 cooldowns";
  expect(of({ fringesTested: 100, fringesDetected: 5 }).get(none)).toBe(true);
  expect(of({ fringesTested: 100, fringesDetected: 6 }).get(none)).toBe(false);
  const one = "frames of one state: fraction not 0 or 1; profiles";
  expect(of({ singleStateFrames: 9 }).get(one)).toBe(true);
  expect(of({ singleStateFrames: 9, singleStateProfiles: 1 }).get(one)).toBe(false);
  const inDoubt = { knownUndecidable: 3, toldUndecidable: 2 };
  const events = "births, deaths, splits, merges, all steps of temperature: found; right";
  expect(of({ events: { known: 20, found: 19, told: 20, right: 19, ...inDoubt } }).get(events)).toBe(true);
  expect(of({ events: { known: 20, found: 20, told: 20, right: 18, ...inDoubt } }).get(events)).toBe(false);
});
