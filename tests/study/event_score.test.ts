import { describe, expect, test } from "vitest";
import { defaultSpec } from "../../src/demo/index.js";
import type { FrameDomains, TrackedDomain } from "../../src/model/domains.js";
import { INSULATING, METALLIC, NO_STATE, type DomainMap, type Drift } from "../../src/model/signal.js";
import { defaultsOf } from "../../src/model/settings.js";
import { labelDomains, settings, trackDomains } from "../../src/stages/domains/index.js";
import { judgeEvents } from "../../src/study/event_score.js";
import { eventTruth, NOT_MEASURED, type EventTruth } from "../../src/study/event_truth.js";

const s = defaultsOf(settings);
const N = 40;
const PIXEL = { xNm: 10, yNm: 10 };
const tip = { resolutionNm: 30, resolutionSdNm: 0 };
const label = (map: DomainMap, frame: number): FrameDomains => labelDomains(map, frame, tip, s);

/** Two squares of share 1, of 100 and 120 pixels, with a bridge of the given share between them; nothing else. */
function bridged(share: number): Float32Array {
  const out = new Float32Array(N * N);
  for (let i = 10; i < 20; i++) {
    for (let j = 6; j < 16; j++) out[i * N + j] = 1;
    for (let j = 20; j < 32; j++) out[i * N + j] = 1;
  }
  for (let j = 16; j < 20; j++) out[15 * N + j] = share;
  return out;
}

function judged(shares: readonly Float32Array[], hidden: readonly Uint8Array[], shown = shares) {
  const spec = defaultSpec({
    rows: N,
    cols: N,
    pixel: PIXEL,
    series: [{ branch: "cooling", temperaturesK: shares.map((_, k) => 160 - k) }],
    drift: { listNm: shares.map(() => [0, 0] as const) },
  });
  const truth: EventTruth = { share: shares, hidden, doubt: 0.05 };
  const seen = shown.map((u, k) => {
    const states = Uint8Array.from(u, (v, p) =>
      hidden[k][p] === NOT_MEASURED ? NO_STATE : v > 0.5 ? METALLIC : INSULATING,
    );
    return label({ rows: N, cols: N, pixel: PIXEL, states }, k);
  });
  const drifts = shares.map((_, frame): Drift => ({ frame, xNm: 0, yNm: 0, sdNm: 0 }));
  const domains: TrackedDomain[] = trackDomains(seen, drifts, { ...s, neckNm: 5 }, tip);
  const { known, told } = judgeEvents(spec, truth, seen, domains, label);
  const words = (list: typeof known): string[] => list.map((e) => `${e.event.what} ${e.event.frame} ${e.verdict}`);
  return { known: words(known), told: words(told) };
}
const clear = (n: number): Uint8Array[] => Array.from({ length: n }, () => new Uint8Array(N * N));

describe("the score of events", () => {
  test("a merger far from any doubt is asked for, and answered by the histories", () => {
    expect(judged([bridged(0), bridged(1)], clear(2))).toEqual({
      known: ["merge 1 answered"],
      told: ["merge 1 answered"],
    });
  });

  test("what the histories miss and what they invent are both held against them", () => {
    const shares = [bridged(0), bridged(1)];
    expect(judged(shares, clear(2), [bridged(0), bridged(0)])).toEqual({ known: ["merge 1 unanswered"], told: [] });
    expect(judged([bridged(1), bridged(1)], clear(2), shares)).toEqual({ known: [], told: ["merge 1 unanswered"] });
  });

  test("a neck nearer to one half than the noise can tell decides nothing, seen or not", () => {
    expect(judged([bridged(0), bridged(0.53)], clear(2))).toEqual({
      known: ["merge 1 undecidable"],
      told: ["merge 1 undecidable"],
    });
    expect(judged([bridged(0), bridged(0.47)], clear(2), [bridged(0), bridged(1)]).told).toEqual([
      "merge 1 undecidable",
    ]);
    expect(judged([bridged(0), bridged(0.57)], clear(2)).known).toEqual(["merge 1 answered"]);
  });

  test("nor does one in rows not measured; rows elsewhere change nothing", () => {
    const rows = (from: number, to: number): Uint8Array[] => {
      const gap = new Uint8Array(N * N).fill(NOT_MEASURED, from * N, to * N);
      return [new Uint8Array(N * N), gap];
    };
    // the bridge lies in row 15
    expect(judged([bridged(1), bridged(0)], rows(15, 16)).known).toEqual(["split 1 undecidable"]);
    expect(judged([bridged(1), bridged(0)], rows(30, 34))).toEqual({
      known: ["split 1 answered"],
      told: ["split 1 answered"],
    });
  });

  test("the doubt follows the noise of the simulated frames", () => {
    const doubt = (complex: number): number =>
      eventTruth(
        defaultSpec({
          rows: 16,
          cols: 16,
          series: [{ branch: "cooling", temperaturesK: [153] }],
          noise: { complex, phaseRad: 0 },
          gain: { rowSd: 0 },
          phaseOffset: { rowSdRad: 0 },
        }),
      ).doubt;
    // 2 sd of the mean over the 7.07 pixels of a spot of 30 nm, in units of the contrast |2.2·e^{0.6i} − 1| (near 1.48 at 153 K)
    expect(doubt(0.05)).toBeCloseTo((2 * 0.05) / 1.48 / Math.sqrt(7.07), 3);
    expect(doubt(0.1) / doubt(0.05)).toBeCloseTo(2, 6);
  });
});
