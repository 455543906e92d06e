import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../../src/model/settings.js";
import { labelDomains, settings } from "../../../src/stages/domains/index.js";
import { makeRandom } from "../../../src/numerics/random.js";
import { mapFrom, mapOf } from "./maps.js";

const s = { ...defaultsOf(settings), leastPixels: 1 };
const kinds = (lines: string[]): { metallic: number; insulating: number } => {
  const { regions } = labelDomains(mapOf(lines), 0, null, s);
  return {
    metallic: regions.filter((r) => r.kind === "metallic").length,
    insulating: regions.filter((r) => r.kind === "insulating").length,
  };
};

describe("labels", () => {
  test("metallic pixels join over corners, insulating ones over sides only", () => {
    expect(kinds(["#.", ".#"])).toEqual({ metallic: 1, insulating: 2 });
  });

  test("unmeasured pixels join nothing", () => {
    expect(kinds(["##?##", "##?##"])).toEqual({ metallic: 2, insulating: 0 });
    expect(kinds(["..?..", "..?.."])).toEqual({ metallic: 0, insulating: 2 });
  });

  test("regions below the tip's spot are no domains", () => {
    const map = mapOf(["......", ".##...", ".##.#.", "......"]);
    const tip = { resolutionNm: 20, resolutionSdNm: 0 }; // a spot of 314 nm²: four pixels of 100 nm²
    const found = labelDomains(map, 0, tip, s);
    expect(found.regions.map((r) => [r.kind, r.areaNm2])).toEqual([
      ["insulating", 1900],
      ["metallic", 400],
    ]);
    expect(found.labels[2 * 6 + 4]).toBe(0);
  });

  test("the border is the image's edge, and gaps that reach it; a gap inside is none", () => {
    const at = (lines: string[]): (boolean | undefined)[] => {
      const { regions } = labelDomains(mapOf(lines), 0, null, s);
      return ["metallic", "insulating"].map((k) => regions.find((r) => r.kind === k)?.touchesBorder);
    };
    expect(at([".....", ".##..", ".....", "....."])).toEqual([false, true]);
    expect(at(["#....", ".....", "....."])).toEqual([true, true]);
    expect(at(["?????", ".##..", ".....", "....."])).toEqual([true, true]);
    expect(at([".......", ".......", "..##?..", ".......", "......."])).toEqual([false, true]);
  });

  test("area, centroid and perimeter in nm with unequal pixel sides", () => {
    const map = mapFrom(60, 80, { xNm: 10, yNm: 14 }, (x, y) => Math.hypot(x - 402, y - 391) < 230);
    const disc = labelDomains(map, 7, null, s).regions.find((r) => r.kind === "metallic");
    expect(disc?.areaNm2).toBeCloseTo(Math.PI * 230 ** 2, -4);
    expect(Math.abs((disc?.xNm ?? 0) - 402)).toBeLessThan(1.5);
    expect(Math.abs((disc?.yNm ?? 0) - 391)).toBeLessThan(1.5);
    expect((disc?.perimeterNm ?? 0) / (2 * Math.PI * 230)).toBeCloseTo(1, 1.5);
  });

  test.each([
    ["square pixels", 10, 10],
    ["unequal pixels", 10, 13],
  ])("perimeters of discs at random places: mean right to 1 %%, each to 5 %% (%s)", (_, xNm, yNm) => {
    const random = makeRandom(3);
    for (const radius of [60, 120, 250]) {
      let sum = 0;
      for (let k = 0; k < 40; k++) {
        const cx = 300 + 10 * random.uniform();
        const cy = 300 + 13 * random.uniform();
        const map = mapFrom(60, 60, { xNm, yNm }, (x, y) => Math.hypot(x - cx, y - cy) < radius);
        const disc = labelDomains(map, 0, null, s).regions.find((r) => r.kind === "metallic");
        const ratio = (disc?.perimeterNm ?? 0) / (2 * Math.PI * radius);
        expect(Math.abs(ratio - 1)).toBeLessThan(0.05);
        sum += ratio / 40;
      }
      expect(Math.abs(sum - 1)).toBeLessThan(0.01);
    }
  });

  test("a hole adds to the perimeter of both, debris to none", () => {
    const ring = mapFrom(70, 70, { xNm: 10, yNm: 10 }, (x, y) => {
      const r = Math.hypot(x - 345, y - 345);
      return r < 260 && r > 120;
    });
    const { regions } = labelDomains(ring, 0, null, s);
    const metal = regions.find((r) => r.kind === "metallic");
    const hole = regions.find((r) => r.kind === "insulating" && !r.touchesBorder);
    expect((metal?.perimeterNm ?? 0) / (2 * Math.PI * 380)).toBeCloseTo(1, 1.5);
    expect((hole?.perimeterNm ?? 0) / (2 * Math.PI * 120)).toBeCloseTo(1, 1.5);
    const states = Uint8Array.from(ring.states, (v, p) =>
      Math.hypot((p % 70) * 10 - 345, Math.floor(p / 70) * 10 - 345) <= 120 ? 255 : v,
    );
    const covered = labelDomains({ ...ring, states }, 0, null, s).regions.find((r) => r.kind === "metallic");
    expect((covered?.perimeterNm ?? 0) / (2 * Math.PI * 260)).toBeCloseTo(1, 1.5);
    expect(covered?.touchesBorder).toBe(false);
  });
});
