import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { METALLIC, INSULATING, type DomainMap, type Drift } from "../../../src/model/signal.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { labelDomains, settings, trackDomains } from "../../../src/stages/domains/index.js";
import { randomField } from "./maps.js";
import { answered, eventsBetween, eventsOf, type DomainEvent } from "../../../src/study/domain_events.js";

const s = defaultsOf(settings);
const tip = { resolutionNm: 30, resolutionSdNm: 0 };
const PX = 10;
const N = 150;
const FRAMES = 16;
const LEAST_PX = Math.max(20, (2 * Math.PI * 15 ** 2) / PX ** 2);

/** One cooldown of a field whose walls move: noise-free maps on the reference grid with a margin, and noisy maps of a drifting window. */
function cooldown(seed: number, noise: number) {
  const random = makeRandom(seed);
  const lengthNm = 110;
  const field = randomField(seed + 1000, lengthNm);
  const map = (states: Uint8Array): DomainMap => ({ rows: N, cols: N, pixel: { xNm: PX, yNm: PX }, states });
  const truth = [];
  const seen = [];
  const drifts: Drift[] = [];
  const shifts = [];
  let xNm = 0;
  let yNm = 0;
  for (let k = 0; k < FRAMES; k++) {
    const level = 1.5 - 0.2 * k;
    const clean = field(N, N, PX, 0, 0, 0.15 * k);
    truth.push(labelDomains(map(Uint8Array.from(clean, (v) => (v > level ? METALLIC : INSULATING))), k, tip, s));
    const noisy = Uint8Array.from(field(N, N, PX, xNm, yNm, 0.15 * k), (v) => {
      const share = 1 / (1 + Math.exp((-2 * (v - level) * lengthNm) / 18));
      return share + noise * random.normal() > 0.5 ? METALLIC : INSULATING;
    });
    seen.push(labelDomains(map(noisy), k, tip, s));
    // The drift as known: off by its stated standard deviation.
    const sd = 0.8;
    const off = (): number => (k === 0 ? 0 : (sd * random.normal()) / Math.SQRT2);
    drifts.push({ frame: k, xNm: xNm + off(), yNm: yNm + off(), sdNm: k === 0 ? 0 : sd });
    shifts.push({ rows: Math.round(yNm / PX), cols: Math.round(xNm / PX) });
    xNm += (random.uniform() - 0.5) * 60;
    yNm += (random.uniform() - 0.5) * 60;
  }
  const known: DomainEvent[] = [];
  for (let k = 1; k < FRAMES; k++) known.push(...eventsBetween(truth[k - 1], truth[k], k, LEAST_PX));
  const found = eventsOf(trackDomains(seen, drifts, s, tip), seen, shifts, LEAST_PX);
  return { known, found };
}

/** Away from the edge of the reference field by more than the drift: there both know everything. */
function inside(e: DomainEvent): boolean {
  for (const p of e.pixels) {
    const i = Math.floor(p / 100000) - 1000;
    const j = (p % 100000) - 1000;
    if (i < 25 || j < 25 || i >= N - 25 || j >= N - 25) return false;
  }
  return true;
}

describe("events of large domains against the noise-free maps, under drift", () => {
  test.each([0.05])("precision and recall, noise %f of the step", (noise) => {
    const recall: Record<string, { all: number; found: number }> = {};
    const precision: Record<string, { all: number; found: number }> = {};
    for (let seed = 1; seed <= 25; seed++) {
      const { known, found } = cooldown(seed, noise);
      const add = (to: typeof recall, from: typeof recall): void => {
        for (const [k, c] of Object.entries(from)) {
          const t = (to[k] ??= { all: 0, found: 0 });
          t.all += c.all;
          t.found += c.found;
        }
      };
      add(recall, answered(known.filter(inside), found).counts);
      add(precision, answered(found.filter(inside), known).counts);
    }
    let asked = 0;
    let known = 0;
    let told = 0;
    let right = 0;
    for (const what of ["birth", "death", "split", "merge"]) {
      expect(recall[what].all).toBeGreaterThan(30);
      // Some fifty events of each kind: one in twenty is within the chance of two or three; all kinds together must hold it.
      expect(recall[what].found / recall[what].all).toBeGreaterThanOrEqual(0.92);
      expect(precision[what].found / precision[what].all).toBeGreaterThanOrEqual(0.92);
      asked += recall[what].all;
      known += recall[what].found;
      told += precision[what].all;
      right += precision[what].found;
    }
    expect(known / asked).toBeGreaterThanOrEqual(0.95);
    expect(right / told).toBeGreaterThanOrEqual(0.95);
  });
});
