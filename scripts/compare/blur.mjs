// Gaussian blur that leaves pixels out, and the exact distance map.
import { maskedBlur } from "../../dist/raster/masked_blur.js";
import { makeField, toFloat32 } from "./fields.mjs";
import { largestDifference, row } from "./rows.mjs";

const ROWS = 70;
const COLS = 90;
const FIELDS = 6;

export function makeBlur(random, put) {
  const sigmas = [];
  const found = [];
  for (let k = 0; k < FIELDS; k++) {
    const data = toFloat32(makeField(random, { lengthPx: 2 }).render(ROWS, COLS), (v) => 5 + v + random.normal());
    for (let p = 0; p < data.length; p++) if (random.uniform() < 0.1 * k) data[p] = Number.NaN;
    const sigma = [0.5 + 3 * random.uniform(), 0.5 + 3 * random.uniform()];
    put(`image${k}`, data, [ROWS, COLS]);
    sigmas.push(sigma);
    found.push(maskedBlur(data, null, ROWS, COLS, sigma[0], sigma[1]));
  }
  return {
    input: { fields: FIELDS, sigmas },
    compare(theirs) {
      const worst = (of) => Math.max(...found.map((f, k) => largestDifference(f[of], theirs[k][of])));
      return [
        row(
          "masked blur: values over a noise of 1 (gaussian_filter of value·mask over that of mask)",
          FIELDS * ROWS * COLS,
          worst("values"),
          2e-5,
          "ours sums in single precision",
        ),
        row("masked blur: weights", FIELDS * ROWS * COLS, worst("weight"), 2e-6, "ours sums in single precision"),
      ];
    },
  };
}
