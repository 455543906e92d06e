import { describe, expect, test } from "vitest";
import type { RawFrame } from "../../../src/model/cooldown.js";
import { dataOf, makeRaster } from "../../../src/model/raster.js";
import { defaultsOf } from "../../../src/model/settings.js";
import { cleanFrame, cleanSettings } from "../../../src/stages/clean/index.js";
import { synthetic } from "./synthetic.js";

const settings = defaultsOf(cleanSettings);
const made = synthetic({ rows: 64, cols: 64, seed: 4 });

/** The made frame with other values at some pixels of a channel. */
function withValues(channel: "amplitude" | "topography", values: ReadonlyMap<number, number>): RawFrame {
  const raster = made.raw[channel]!;
  const data = dataOf(raster).slice();
  for (const [p, v] of values) data[p] = v;
  return { ...made.raw, [channel]: makeRaster(data, made.rows, made.cols, raster.pixel) };
}
const unmeasuredAt = (raw: RawFrame, channel: "amplitude" | "topography"): number[] => {
  const data = dataOf(cleanFrame(raw, settings).clean[channel]!);
  return [...data.keys()].filter((p) => Number.isNaN(data[p]));
};

describe("values that no sample can have", () => {
  test.each([1e4, -9999, 1e20, -5e20, 3e38])(
    "one amplitude of %s is left out and said; all else is as if not measured",
    (v) => {
      const raw = withValues("amplitude", new Map([[700, v]]));
      const gap = withValues("amplitude", new Map([[700, Number.NaN]]));
      const { clean, report } = cleanFrame(raw, settings);
      expect(dataOf(clean.amplitude)).toEqual(dataOf(cleanFrame(gap, settings).clean.amplitude));
      expect(report.notices.filter((n) => n.code === "wild-pixels").map((n) => n.message)).toEqual([
        expect.stringMatching(
          /^amplitude: 1 pixel far outside the values of all others \(.+\) counts as not measured$/,
        ),
      ]);
    },
  );
  test.each([-1e38, 4e5])("a height of %s nm, too", (v) => {
    const raw = withValues("topography", new Map([[900, v]]));
    expect(unmeasuredAt(raw, "topography")).toContain(900);
  });
  test("a tall particle and a bright speck stay", () => {
    const tall = withValues(
      "topography",
      new Map([
        [900, 900],
        [901, 900],
      ]),
    );
    const bright = withValues(
      "amplitude",
      new Map([
        [900, 30],
        [901, 30],
      ]),
    );
    for (const raw of [tall, bright]) {
      expect(cleanFrame(raw, settings).report.notices.map((n) => n.code)).not.toContain("wild-pixels");
    }
  });
  test("a channel of zeros or of nothing is left as it is", () => {
    for (const v of [0, Number.NaN]) {
      const raster = made.raw.amplitude;
      const data = new Float32Array(made.rows * made.cols).fill(v);
      const raw = { ...made.raw, amplitude: makeRaster(data, made.rows, made.cols, raster.pixel) };
      expect(cleanFrame(raw, settings).report.notices.map((n) => n.code)).not.toContain("wild-pixels");
    }
  });
});
