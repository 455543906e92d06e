import { describe, expect, test } from "vitest";
import type { TrackedDomain } from "../../../src/model/domains.js";
import { defaultsOf } from "../../../src/model/settings.js";
import type { Drift } from "../../../src/model/signal.js";
import { labelDomains, settings, trackDomains } from "../../../src/stages/domains/index.js";
import { mapOf } from "./maps.js";

const s = { ...defaultsOf(settings), leastPixels: 1 };
const still = (frame: number): Drift => ({ frame, xNm: 0, yNm: 0, sdNm: 0 });

function track(maps: string[][], drifts: Drift[] = maps.map((_, k) => still(k)), neckNm = 5): TrackedDomain[] {
  const frames = maps.map((m, k) => labelDomains(mapOf(m), k, null, s));
  return trackDomains(frames, drifts, { ...s, neckNm });
}
const story = (d: TrackedDomain): string => `${d.origin} ${d.appearances.map((a) => a.frame).join(",")} ${d.fate}`;
const stories = (domains: TrackedDomain[], kind = "metallic"): string[] =>
  domains.filter((d) => d.kind === kind).map(story);

const EMPTY = ["..........", "..........", "..........", "..........", ".........."];
const BLOB = ["..........", "..###.....", "..###.....", "..###.....", ".........."];
const TWO = ["..........", "..##..#...", "..##..#...", "..##..#...", ".........."];
const JOINED = ["..........", "..#####...", "..#####...", "..#####...", ".........."];

describe("histories", () => {
  test("a domain appears, stays and goes", () => {
    expect(stories(track([EMPTY, BLOB, BLOB, EMPTY]))).toEqual(["nucleated 1,2 vanished"]);
    expect(stories(track([EMPTY, BLOB, BLOB, EMPTY]), "insulating")).toEqual(["first-frame 0,1,2,3 last-frame"]);
  });

  test("of merging domains the largest lives on, of a split one the largest piece", () => {
    expect(stories(track([TWO, JOINED, JOINED]))).toEqual(["first-frame 0,1,2 last-frame", "first-frame 0 merged"]);
    expect(stories(track([JOINED, TWO, TWO]))).toEqual(["first-frame 0,1,2 last-frame", "split 1,2 last-frame"]);
    const [large] = track([TWO, JOINED]).filter((d) => d.kind === "metallic");
    expect(large.appearances[0].label).toBe(2); // reading order: 1 is the insulating rest, 2 the larger metallic one
  });

  test("a domain that moves less than its own size stays itself, one that is elsewhere is another", () => {
    const moved = ["..........", "....###...", "....###...", "....###...", ".........."];
    const away = ["..........", "......###.", "......###.", "......###.", ".........."];
    expect(stories(track([BLOB, moved], undefined))).toHaveLength(2); // 3 of 9 pixels shared, none of them deep
    expect(stories(track([BLOB, away]))).toEqual(["first-frame 0 vanished", "nucleated 1 last-frame"]);
    const shared = ["..........", "...###....", "...###....", "...###....", ".........."];
    expect(stories(track([BLOB, shared]))).toEqual(["first-frame 0,1 last-frame"]);
  });

  test("several against several: the largest overlap in all", () => {
    const before = ["######....", "######....", "..........", ".....#####", ".....#####"];
    const after = ["###.......", "###..#####", ".....#####", ".....#####", ".....#####"];
    expect(stories(track([before, after]))).toEqual(["first-frame 0,1 last-frame", "first-frame 0,1 last-frame"]);
  });

  test("what comes over the frame's edge has not nucleated", () => {
    const atEdge = ["##........", "##........", "..........", "..........", ".........."];
    expect(stories(track([EMPTY, atEdge, EMPTY]))).toEqual(["border 1 border"]);
    // The window moved left by 3 pixels: the blob was outside the field before.
    const drifts = [still(0), { frame: 1, xNm: -30, yNm: 0, sdNm: 1 }];
    const left = ["..........", ".##.......", ".##.......", "..........", ".........."];
    expect(stories(track([EMPTY, left], drifts))).toEqual(["border 1 last-frame"]);
    const right = ["..........", "......##..", "......##..", "..........", ".........."];
    expect(stories(track([EMPTY, right], drifts))).toEqual(["nucleated 1 last-frame"]);
  });

  test("drift is undone: the sign of the contract", () => {
    // A feature that moved by +2 columns in the image gives the frame a drift of −2 pixels.
    const moved = ["..........", "....###...", "....###...", "....###...", ".........."];
    expect(stories(track([BLOB, moved], [still(0), { frame: 1, xNm: -20, yNm: 0, sdNm: 0.5 }]))).toEqual([
      "first-frame 0,1 last-frame",
    ]);
  });

  test("frames without drift, or without any state, are passed over", () => {
    const lost = { frame: 1, xNm: null, yNm: null, sdNm: null };
    expect(stories(track([BLOB, EMPTY, BLOB], [still(0), lost, still(2)]))).toEqual(["first-frame 0,2 last-frame"]);
    const nothing = BLOB.map((l) => "?".repeat(l.length));
    expect(stories(track([BLOB, nothing, BLOB]))).toEqual(["first-frame 0,2 last-frame"]);
  });

  test("a cut or a join of one frame is noise where it is narrower than the tip, an event where it is wider or lasts", () => {
    const whole = ["..........", "..#####...", "..#####...", "..#####...", ".........."];
    const cut = ["..........", "..###.#...", "..###.#...", "..###.#...", ".........."];
    expect(stories(track([whole, cut, whole], undefined, 15))).toEqual(["first-frame 0,1,2 last-frame"]);
    expect(stories(track([whole, cut, whole], undefined, 5))).toEqual([
      "first-frame 0,1,2 last-frame",
      "split 1 merged",
    ]);
    expect(stories(track([whole, cut, cut], undefined, 15))).toEqual([
      "first-frame 0,1,2 last-frame",
      "split 1,2 last-frame",
    ]);
    const apart = ["...........", "###.....##.", "###.....##.", "###.....##.", "..........."];
    const neck = ["...........", "###.....##.", "##########.", "###.....##.", "..........."];
    expect(stories(track([apart, neck, apart], undefined, 15))).toEqual([
      "first-frame 0,1,2 last-frame",
      "first-frame 0,2 last-frame",
    ]);
    expect(stories(track([apart, neck, apart], undefined, 5))).toEqual([
      "first-frame 0,1,2 last-frame",
      "first-frame 0 merged",
      "split 2 last-frame",
    ]);
  });

  const WHOLE = ["..........", "..####....", "..####....", "..####....", "..####....", "..####....", ".........."];
  const SPLIT = ["..........", "..####....", "..####....", "..........", "..........", "..####....", ".........."];
  const hiding = (map: string[]): string[] => map.map((l, i) => (i === 3 || i === 4 ? "?".repeat(l.length) : l));

  test("what rows not measured cut in one frame has not split, however many they are", () => {
    expect(stories(track([WHOLE, hiding(WHOLE), WHOLE]))).toEqual(["first-frame 0,1,2 last-frame"]);
    expect(stories(track([WHOLE, hiding(WHOLE), hiding(WHOLE), WHOLE]))).toEqual([
      "first-frame 0,1,2,3 last-frame",
      "border 1,2 border",
    ]);
    expect(stories(track([hiding(WHOLE), WHOLE]))).toEqual(["first-frame 0,1 last-frame", "first-frame 0 border"]);
  });

  test("pieces seen apart after rows not measured have split, domains seen apart before them have merged", () => {
    expect(stories(track([WHOLE, hiding(SPLIT), SPLIT]))).toEqual([
      "first-frame 0,1,2 last-frame",
      "split 1,2 last-frame",
    ]);
    expect(stories(track([SPLIT, hiding(WHOLE), WHOLE]))).toEqual([
      "first-frame 0,1,2 last-frame",
      "first-frame 0,1 merged",
    ]);
    // with nothing seen after it, nobody knows
    expect(stories(track([WHOLE, hiding(SPLIT)]))).toEqual(["first-frame 0,1 last-frame", "border 1 last-frame"]);
  });

  test("a cut seen beside rows not measured is a split", () => {
    const gap = [...WHOLE, "??????????", ".........."];
    const cut = [...SPLIT, "??????????", ".........."];
    expect(stories(track([gap, cut, cut]))).toEqual(["first-frame 0,1,2 last-frame", "split 1,2 last-frame"]);
    expect(stories(track([cut, gap, gap]))).toEqual(["first-frame 0,1,2 last-frame", "first-frame 0 merged"]);
  });

  test("a scar or a particle across a domain has not split it", () => {
    const scar = ["..........", "..####....", "..####....", "..????....", "..####....", "..####....", ".........."];
    expect(stories(track([WHOLE, scar, scar, WHOLE]))).toEqual(["first-frame 0,1,2,3 last-frame", "border 1,2 border"]);
    // a scar inside one of two domains that merge hides nothing of that
    const apart = ["..........", "..####....", "..?###....", "..........", "..........", "..####....", ".........."];
    expect(stories(track([apart, WHOLE, WHOLE]))).toEqual(["first-frame 0,1,2 last-frame", "first-frame 0 merged"]);
  });

  test("domains that the field's edge cuts have not merged when the window moves on to where they join, nor split when it moves away", () => {
    // One domain in the shape of a U, open to the left. The first window ends before its bend, the second one 30 nm further right holds it.
    const left = ["..........", "...#######", "...#######", "..........", "..........", ".....#####", ".........."];
    const right = ["..........", "#########.", "#########.", ".......##.", ".......##.", "..#######.", ".........."];
    const moved = [still(0), { frame: 1, xNm: 30, yNm: 0, sdNm: 0 }];
    expect(stories(track([left, right], moved))).toEqual(["first-frame 0,1 last-frame", "first-frame 0 border"]);
    const back = [still(0), { frame: 1, xNm: -30, yNm: 0, sdNm: 0 }];
    expect(stories(track([right, left], back))).toEqual(["first-frame 0,1 last-frame", "border 1 last-frame"]);
    // the same maps with the bend inside both fields: it has grown, or gone
    const whole = ["..........", "...######.", "...######.", "........#.", "........#.", ".....####.", ".........."];
    const open = ["..........", "...######.", "...######.", "..........", "..........", ".....####.", ".........."];
    expect(stories(track([open, whole]))).toEqual(["first-frame 0,1 last-frame", "first-frame 0 merged"]);
    expect(stories(track([whole, open]))).toEqual(["first-frame 0,1 last-frame", "split 1 last-frame"]);
  });

  test("the same from a source that gives frames on demand", () => {
    const maps = [TWO, JOINED, TWO, EMPTY];
    const frames = maps.map((m, k) => labelDomains(mapOf(m), k, null, s));
    const drifts = maps.map((_, k) => still(k));
    expect(trackDomains({ count: 4, at: (k) => frames[k] }, drifts, s)).toEqual(trackDomains(frames, drifts, s));
  });

  test("births − deaths + splits − merges is the change of number", () => {
    const maps = [TWO, JOINED, TWO, BLOB, EMPTY, TWO];
    const frames = maps.map((m, k) => labelDomains(mapOf(m), k, null, s));
    const domains = trackDomains(
      frames,
      maps.map((_, k) => still(k)),
      { ...s, neckNm: 1 },
    );
    for (let k = 1; k < maps.length; k++) {
      const came = domains.filter((d) => d.appearances[0].frame === k).length;
      const went = domains.filter((d) => d.appearances[d.appearances.length - 1].frame === k - 1).length;
      expect(frames[k].regions.length - frames[k - 1].regions.length).toBe(came - went);
    }
  });
});
