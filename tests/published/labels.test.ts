import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../src/model/settings.js";
import { INSULATING, METALLIC } from "../../src/model/signal.js";
import { labelDomains, settings } from "../../src/stages/domains/index.js";
import { fixture } from "./fixture.js";

/** Source: a seeded map, labelled by scikit-image 0.19.3 (measure.label, euler_number) and by SciPy's ndimage, which agree. */
interface Counted {
  count: number;
  count_of_the_rest_in_the_dual_connectivity: number;
  euler_number: number;
  areas_sorted: number[];
  touching_border: number;
}
interface Published {
  image: number[][];
  threshold_114: { connectivity_4: Counted; connectivity_8: Counted; perimeter_crofton: Record<string, number> };
  threshold_120: { connectivity_4: Counted; connectivity_8: Counted; perimeter_crofton: Record<string, number> };
  small_map: Record<string, number> & { rows: string[] };
}
const published = fixture<Published>("segmentation");
const s = { ...defaultsOf(settings), leastPixels: 1 };

function found(above: number[][], asMetallic: boolean) {
  const rows = above.length;
  const cols = above[0].length;
  const on = asMetallic ? METALLIC : INSULATING;
  const states = Uint8Array.from(above.flat(), (v) => (v === 1 ? on : METALLIC + INSULATING - on));
  const { regions } = labelDomains({ rows, cols, pixel: { xNm: 1, yNm: 1 }, states }, 0, null, s);
  const mine = regions.filter((r) => r.kind === (asMetallic ? "metallic" : "insulating"));
  const rest = regions.filter((r) => r.kind !== (asMetallic ? "metallic" : "insulating"));
  return { mine, rest, euler: mine.length - rest.filter((r) => !r.touchesBorder).length };
}

describe("labels against other programs", () => {
  test.each([114, 120] as const)("numbers, areas, borders and Euler numbers of a noisy map cut at %i", (threshold) => {
    const want = published[`threshold_${threshold}`];
    const above = published.image.map((row) => row.map((v) => (v > threshold ? 1 : 0)));
    for (const [asMetallic, counted] of [
      [true, want.connectivity_8],
      [false, want.connectivity_4],
    ] as const) {
      const { mine, rest, euler } = found(above, asMetallic);
      expect(mine.length).toBe(counted.count);
      expect(rest.length).toBe(counted.count_of_the_rest_in_the_dual_connectivity);
      expect(euler).toBe(counted.euler_number);
      expect(mine.map((r) => r.areaNm2).sort((a, b) => b - a)).toEqual(counted.areas_sorted);
      expect(mine.filter((r) => r.touchesBorder).length).toBe(counted.touching_border);
    }
  });

  test("a small map with corners in every arrangement", () => {
    const map = published.small_map;
    const above = map.rows.map((r) => Array.from(r, Number));
    const metal = found(above, true);
    expect(metal.mine.length).toBe(map["components_8"]);
    expect(metal.rest.length).toBe(map["rest_components_4"]);
    const insulator = found(above, false);
    expect(insulator.mine.length).toBe(map["components_4"]);
    expect(insulator.rest.length).toBe(map["rest_components_8"]);
  });
});
