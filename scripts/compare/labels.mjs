// Domains: numbers, areas, centroids and perimeters under the connectivity of each state.
import { defaultsOf } from "../../dist/model/settings.js";
import { INSULATING, METALLIC } from "../../dist/model/signal.js";
import { labelDomains, settings } from "../../dist/stages/domains/index.js";
import { makeField } from "./fields.mjs";
import { largestDifference, largestRelative, row } from "./rows.mjs";

const ROWS = 100;
const COLS = 120;
const MAPS = 8;

const order = (a, b) => a.area - b.area || a.y - b.y || a.x - b.x;

export function makeLabels(random, put) {
  const s = { ...defaultsOf(settings), leastPixels: 1 };
  const found = [];
  for (let k = 0; k < MAPS; k++) {
    // From pure noise, with corners everywhere, to smooth domains.
    const field = makeField(random, { lengthPx: 2 }).render(ROWS, COLS);
    const cut = 0.6 * (random.uniform() - 0.5);
    const metallic = Uint8Array.from(field, (v) => (v + (1.5 * k * random.normal()) / MAPS > cut ? 1 : 0));
    put(`map${k}`, metallic, [ROWS, COLS]);
    const states = metallic.map((v) => (v === 1 ? METALLIC : INSULATING));
    const map = { rows: ROWS, cols: COLS, pixel: { xNm: 1, yNm: 1 }, states };
    const { regions } = labelDomains(map, 0, null, s);
    for (const kind of ["metallic", "insulating"]) {
      const mine = regions
        .filter((r) => r.kind === kind)
        .map((r) => ({ area: r.areaNm2, y: r.yNm, x: r.xNm, perimeter: r.perimeterNm, border: r.touchesBorder }));
      found.push(mine.sort(order));
    }
  }
  return {
    input: { maps: MAPS },
    compare(theirs) {
      const other = theirs.map((list) => list.toSorted(order));
      const flat = (lists, of) => lists.flat().map((r) => r[of]);
      const inside = (list) => list.flat().filter((r) => !r.border);
      const numbers = (lists) => lists.map((l) => l.length);
      return [
        row(
          "domains: number of each state (label, connectivity 2 and 1)",
          found.length,
          largestDifference(numbers(found), numbers(other)),
          0,
          "whole numbers",
        ),
        row(
          "domains: areas, px (regionprops)",
          found.flat().length,
          largestDifference(flat(found, "area"), flat(other, "area")),
          0,
          "whole numbers",
        ),
        row(
          "domains: those at the border",
          found.flat().length,
          largestDifference(flat(found, "border").map(Number), flat(other, "border").map(Number)),
          0,
          "yes or no",
        ),
        row(
          "domains: centroids, px",
          2 * found.flat().length,
          Math.max(
            largestDifference(flat(found, "y"), flat(other, "y")),
            largestDifference(flat(found, "x"), flat(other, "x")),
          ),
          1e-9,
          "rounding of the sums",
        ),
        row(
          "domains: perimeters inside the frame, relative (perimeter_crofton, 4 directions)",
          inside(found).length,
          largestRelative(
            inside(found).map((r) => r.perimeter),
            inside(other).map((r) => r.perimeter),
          ),
          1e-9,
          "the same four directions and weights on square pixels",
        ),
      ];
    },
  };
}
