import * as fc from "fast-check";
import { describe, expect, test } from "vitest";
import { apparentWidths } from "../../src/figures/apparent.js";
import { fromLch, hexOf, lightnessOf, rgbOf } from "../../src/figures/colour.js";
import { AMPLITUDE_MAP, CYCLIC_PHASE_MAP, HEIGHT_MAP, PHASE_MAP } from "../../src/figures/colour_maps.js";
import type { Row } from "../../src/figures/rows.js";
import { commonScale, paint, valuesOf } from "../../src/figures/paint.js";
import {
  linear,
  logarithmic,
  logTicks,
  niceTicks,
  numberText,
  roundBelow,
  tickLabels,
} from "../../src/figures/scale.js";
import { styleNamed } from "../../src/figures/style.js";
import { element, escapeXml, fitText, polyline, textWidth } from "../../src/figures/svg.js";

describe("ticks", () => {
  test("are round, in order, inside the range, and never fewer than two", () => {
    const span = fc.double({ min: 1e-6, max: 1e6, noNaN: true });
    fc.assert(
      fc.property(
        fc.double({ min: -1e4, max: 1e4, noNaN: true }),
        span,
        fc.integer({ min: 2, max: 8 }),
        (low, width, n) => {
          fc.pre(width > 1e-9 * Math.abs(low) && width > 1e-3 * Math.abs(low));
          const ticks = niceTicks(low, low + width, n);
          expect(ticks.length).toBeGreaterThanOrEqual(2);
          expect(ticks.length).toBeLessThanOrEqual(2.5 * n + 1);
          const step = ticks[1] - ticks[0];
          const digits = step / 10 ** Math.floor(Math.log10(step) + 1e-6);
          expect([1, 2, 5].some((m) => Math.abs(digits - m) < 1e-4)).toBe(true);
          for (let k = 1; k < ticks.length; k++) expect((ticks[k] - ticks[k - 1]) / step).toBeCloseTo(1, 4);
          expect(ticks[0]).toBeGreaterThanOrEqual(low - 1e-6 * width);
          expect(ticks[ticks.length - 1]).toBeLessThanOrEqual(low + width * (1 + 1e-6));
          expect(new Set(tickLabels(ticks)).size).toBe(ticks.length);
        },
      ),
      { seed: 4, numRuns: 300 },
    );
  });

  test("known ones", () => {
    expect(niceTicks(0, 1, 5)).toEqual([0, 0.2, 0.4, 0.6, 0.8, 1]);
    expect(niceTicks(118, 194, 6)).toEqual([120, 140, 160, 180]);
    expect(logTicks(0.005, 2)).toEqual([0.01, 0.1, 1]);
    expect(logTicks(0.3, 6)).toEqual([0.5, 1, 2, 5]);
    expect(tickLabels([-0.05, 0, 0.05])).toEqual(["−0.05", "0.00", "0.05"]);
    expect(numberText(-0.0001, 2)).toBe("0.00");
    expect([roundBelow(896), roundBelow(500), roundBelow(0.3), roundBelow(1999)]).toEqual([500, 500, 0.2, 1000]);
  });

  test("scales meet both ends, and the logarithmic one its middle", () => {
    const x = linear(100, 200, 10, 60);
    expect([x(100), x(200), x(150)]).toEqual([10, 60, 35]);
    const y = logarithmic(0.01, 100, 80, 0);
    expect([y(0.01), y(1), y(100)].map((v) => v.toFixed(9))).toEqual(["80.000000000", "40.000000000", "0.000000000"]);
  });
});

describe("text from outside", () => {
  const HOSTILE = `a"><script>alert(1)</script><image href='x' & \u0000\u001b[31m\u202e]]>`;

  test("cannot end its attribute or its element, and control characters are gone", () => {
    const made = element("text", { "data-cooldown": HOSTILE }, escapeXml(HOSTILE));
    expect(made.match(/<[a-z/]/g)).toEqual(["<t", "</"]);
    for (const ch of made) expect(ch.charCodeAt(0) >= 0x20 && ch !== "\u202e").toBe(true);
    expect(made).toContain("&lt;script&gt;");
  });

  test("is cut where there is no room for it, by whole characters", () => {
    expect(fitText("kv14-run1", 6.5, 200)).toBe("kv14-run1");
    const cut = fitText("\u{1F9CA}".repeat(80), 6.5, 60);
    expect(textWidth(cut, 6.5)).toBeLessThanOrEqual(60 + 6.5);
    expect(cut).toMatch(/^(\u{1F9CA})+…$/u);
  });

  test("a line is interrupted where a value is missing", () => {
    expect(polyline([0, 1, Number.NaN, 3, 4], [0, 1, 2, 3, 4], {})).toContain('d="M0 0L1 1M3 3L4 4"');
  });
});

describe("colours", () => {
  test("OKLab: white, black and a published colour", () => {
    // bottosson.github.io/posts/oklab: XYZ (0.950, 1.000, 1.089) → L 1; sRGB red has L 0.6279554, hue 29.234°, chroma 0.2576833
    expect(lightnessOf([255, 255, 255])).toBeCloseTo(1, 5);
    expect(lightnessOf([0, 0, 0])).toBeCloseTo(0, 9);
    expect(lightnessOf([255, 0, 0])).toBeCloseTo(0.6279554, 5);
    expect(hexOf(fromLch(0.6279554, 0.2576833, 29.2338))).toBe("#ff0000");
  });

  test.each([
    ["amplitude", AMPLITUDE_MAP],
    ["phase", PHASE_MAP],
    ["height", HEIGHT_MAP],
  ])("the map for %s rises in lightness by even steps", (_, map) => {
    const l = Array.from({ length: 18 }, (__, k) => lightnessOf(map(k / 17)));
    const steps = l.slice(1).map((v, k) => v - l[k]);
    expect(Math.min(...steps) / Math.max(...steps)).toBeGreaterThan(0.85);
    expect(l[0]).toBeLessThan(0.25);
    expect(l[17]).toBeGreaterThan(0.94);
  });

  test("the map that goes round ends where it begins, and tells 0 from half a turn in grey", () => {
    const ends = [CYCLIC_PHASE_MAP(0), CYCLIC_PHASE_MAP(1)].map(hexOf);
    expect(ends[0]).toBe(ends[1]);
    expect(lightnessOf(CYCLIC_PHASE_MAP(0)) - lightnessOf(CYCLIC_PHASE_MAP(0.5))).toBeGreaterThan(0.3);
    const steps = Array.from({ length: 64 }, (_, k) =>
      Math.hypot(...CYCLIC_PHASE_MAP(k / 64).map((v, c) => v - CYCLIC_PHASE_MAP((k + 1) / 64)[c])),
    );
    // no seam: no step is far above the usual one
    expect(Math.max(...steps)).toBeLessThan((2.5 * steps.reduce((a, v) => a + v, 0)) / steps.length);
  });

  test.each(["paper", "screen"] as const)(
    "%s: states, and branches, part in grey print and from the ground",
    (name) => {
      const s = styleNamed(name);
      const grey = (hex: string): number => lightnessOf(rgbOf(hex));
      expect(Math.abs(grey(s.metallic) - grey(s.insulating))).toBeGreaterThan(0.2);
      expect(Math.abs(grey(s.series[0]) - grey(s.series[1]))).toBeGreaterThan(0.07);
      for (const c of [s.ink, s.insulating, s.metallic, ...s.series])
        expect(Math.abs(grey(c) - grey(s.background))).toBeGreaterThan(0.24);
      expect(Math.min(s.titlePt, s.textPt)).toBeGreaterThanOrEqual(6);
    },
  );

  test("a preview's codes give its values back, transparent ones none", () => {
    const p = { rows: 1, cols: 3, low: -1, high: 4.1, codes: Uint8Array.of(0, 255, 255, 255, 77, 0) };
    const v = valuesOf(p);
    expect(v[0]).toBe(-1);
    expect(v[1]).toBeCloseTo(4.1, 6);
    expect(v[2]).toBeNaN();
    const scale = commonScale("amplitude", [v]);
    expect(Array.from(paint(v, scale).slice(8, 12))).toEqual([0, 0, 0, 0]);
  });

  test("a phase goes round only where it spans more than half a turn", () => {
    const over = (span: number): Float32Array => Float32Array.from({ length: 500 }, (_, k) => (k / 499 - 0.5) * span);
    expect(commonScale("phase", [over(3)]).cyclic).toBe(false);
    expect(commonScale("phase", [over(4)])).toMatchObject({ cyclic: true, low: -Math.PI, high: Math.PI });
    expect(commonScale("amplitude", [over(4)]).cyclic).toBe(false);
    // round the corner: π − 0.1 and −π − 0.1 are one colour
    const s = commonScale("phase", [over(4)]);
    const pixels = paint(Float32Array.of(Math.PI - 0.1, -Math.PI - 0.1), s);
    expect(pixels.slice(0, 3)).toEqual(pixels.slice(4, 7));
  });
});

test("apparent widths: median and quartiles of the sound profiles alone", () => {
  const row = (apparent_width_nm: number | null, flag = ""): Row => ({ apparent_width_nm, flag });
  const rows = [...[100, 90, 120, 110, 80].map((w) => row(w)), row(500, "poor-fit"), row(null)];
  expect(apparentWidths(rows)).toEqual({ profiles: 5, medianNm: 100, lowQuartileNm: 90, highQuartileNm: 110 });
  expect(apparentWidths([row(500, "curved"), row(null)])).toBeNull();
});
