// Contours: lines, lengths and areas of level sets, with saddles joined either way and pixels that were not measured.
import { enclosedArea, lineLength, traceContours } from "../../dist/raster/contours.js";
import { makeField, toFloat32 } from "./fields.mjs";
import { largestRelative, row } from "./rows.mjs";

const ROWS = 90;
const COLS = 110;
const FIELDS = 6;

export function makeContours(random, put) {
  const found = [];
  const levels = [];
  for (let k = 0; k < FIELDS; k++) {
    const data = toFloat32(makeField(random, { lengthPx: 3 }).render(ROWS, COLS), (v) => v + 0.4 * random.normal());
    if (k % 2 === 1) {
      const i0 = random.below(ROWS - 20);
      const j0 = random.below(COLS - 20);
      for (let i = i0; i < i0 + 20; i++) data.fill(Number.NaN, i * COLS + j0, i * COLS + j0 + 20);
    }
    put(`field${k}`, data, [ROWS, COLS]);
    levels.push(0.8 * (random.uniform() - 0.5));
    for (const join of ["high", "low"]) {
      const lines = traceContours(data, ROWS, COLS, { xNm: 1, yNm: 1 }, levels[k], join);
      found.push({
        lengths: lines.map((l) => lineLength(l.points, l.closed)).sort((a, b) => a - b),
        areas: lines
          .filter((l) => l.closed)
          .map((l) => enclosedArea(l.points))
          .sort((a, b) => a - b),
      });
    }
  }
  return {
    input: { fields: FIELDS, levels },
    compare(theirs) {
      const all = (of) => found.flatMap((f) => f[of]);
      const other = (of) => theirs.flatMap((t) => t[of]);
      const counts = (list) => list.map((f) => `${f.lengths.length} ${f.areas.length}`).join();
      return [
        row(
          "contours: numbers of lines and of closed lines (find_contours)",
          found.length,
          counts(found) === counts(theirs) ? 0 : Infinity,
          0,
          "the same cells, the same rule at saddles and at missing pixels",
        ),
        row(
          "contours: length of every line, relative",
          all("lengths").length,
          largestRelative(all("lengths"), other("lengths")),
          1e-9,
          "rounding of the sums",
        ),
        row(
          "contours: area within every closed line, relative",
          all("areas").length,
          largestRelative(all("areas"), other("areas")),
          1e-8,
          "rounding; small loops cancel in the sum",
        ),
      ];
    },
  };
}
