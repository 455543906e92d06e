import { describe, expect, test } from "vitest";
import { checkOrder } from "../../src/input/check_order.js";
import { cycleNumbers, type SeriesSpan } from "../../src/input/cycles.js";
import type { Branch, FrameInfo } from "../../src/model/cooldown.js";

describe("cycles", () => {
  const spans = (words: string): SeriesSpan[] =>
    words.split(" ").map((w) => {
      const [first, last] = w.slice(1).split("-").map(Number);
      return { branch: w.startsWith("c") ? "cooling" : "warming", firstK: first, lastK: last };
    });
  test.each([
    ["one loop", "c200-100 w100-200", [1, 1]],
    ["two loops", "c200-100 w100-200 c200-100 w100-200", [1, 1, 2, 2]],
    ["cooling only, twice: a cycle begins with every cooling series", "c200-150 c150-100", [1, 2]],
    ["warming first: a cycle of its own", "w100-200 c200-100 w100-200", [1, 2, 2]],
    ["warming only, twice", "w100-150 w100-200", [1, 2]],
    ["a warming run in two files goes on", "c200-100 w100-150 w150-200", [1, 1, 1]],
    ["a warming run begun anew is a cycle of its own", "c200-100 w100-200 w100-200 w100-200", [1, 1, 2, 3]],
    ["and the next cooling begins another", "c200-100 w100-200 w100-200 c200-100 w100-200", [1, 1, 2, 3, 3]],
  ])("%s", (_, words, numbers) => {
    expect(cycleNumbers(spans(words))).toEqual(numbers);
  });
});

function frames(series: readonly (readonly [Branch, readonly number[]])[]): FrameInfo[] {
  const out: FrameInfo[] = [];
  const cycles = cycleNumbers(series.map(([branch, t]) => ({ branch, firstK: t[0], lastK: t[t.length - 1] })));
  series.forEach(([branch, temperatures], index) => {
    temperatures.forEach((temperatureK) => {
      const file = `/data/${out.length}.tif`;
      out.push({
        frame: out.length,
        series: index,
        branch,
        cycle: cycles[index],
        temperatureK,
        startedAt: null,
        endedAt: null,
        stageXNm: null,
        stageYNm: null,
        rows: 4,
        cols: 4,
        sources: { amplitude: { file, label: file, format: "tiff", page: 0, scale: 1 } },
      });
    });
  });
  return out;
}

describe("what is odd about a run is told, and nothing else", () => {
  const pixel = { xNm: 10, yNm: 10 };
  const told = (series: readonly (readonly [Branch, readonly number[]])[]): string[] =>
    checkOrder(frames(series), pixel, 30).map((n) => `${n.frame} ${n.code}: ${n.message}`);

  test("a series that runs the other way is told once, with what to do; a step or two the other way one by one", () => {
    const upside = told([["cooling", [120, 130, 140, 139, 150]]]);
    expect(upside).toEqual([
      "0 branch-contrary: the temperatures of this cooling series rise, from 120 to 150 K: write `branch: warming`, or put the temperatures in the " +
        "order of the frames; as it stands the loop is taken to run the other way",
    ]);
    expect(told([["warming", [150, 140]]])).toEqual([
      expect.stringMatching(/^0 branch-contrary: .* warming series fall, from 150 to 140 K/),
    ]);
    expect(told([["cooling", [150, 140, 145, 130]]])).toEqual([
      expect.stringMatching(/^2 temperature-order: 145 K after 140 K/),
    ]);
  });

  test("a usual run: nothing", () => {
    const usual = [
      ["cooling", [200, 180, 160, 155, 150, 140, 100]],
      ["warming", [100, 150, 155, 160, 200]],
    ] as const;
    expect(told(usual)).toEqual([]);
  });

  test("out of order, repeated, a jump, a warming begun anew", () => {
    expect(told([["cooling", [180, 170, 175, 160]]])).toEqual([
      "2 temperature-order: 175 K after 170 K in a cooling series",
    ]);
    expect(told([["warming", [100, 110, 110, 120]]])).toEqual([
      "2 temperature-repeated: 110 K again, the temperature of the frame before",
    ]);
    expect(told([["cooling", [180, 178, 176, 100, 98]]])).toEqual([
      "3 temperature-jump: a step of 76 K, more than all others of its series together",
    ]);
    const anew = [
      ["cooling", [200, 100]],
      ["warming", [100, 200]],
      ["warming", [110, 200]],
    ] as const;
    expect(told(anew)).toEqual([expect.stringMatching(/^4 warming-without-cooling: .* a cycle of its own$/)]);
  });

  test("one image under two names", () => {
    const run = frames([["cooling", [180, 170]]]);
    const twice = [run[0], { ...run[1], sources: run[0].sources }];
    expect(checkOrder(twice, pixel, null)).toEqual([
      { frame: 1, code: "same-image", message: "amplitude is the same image as frame 0 amplitude (/data/0.tif)" },
    ]);
  });

  test.each([
    [0.01, 30, /is the number in nm/],
    [10_000, null, /is the number in nm/],
    [40, 30, /coarser than the tip's resolution of 30 nm/],
    [10, 1.9, /tip\.resolution_nm of 1\.9 nm is below a fifth of a pixel of 10 × 10 nm: is the number in nm/],
    [10, 2, /coarser than the tip's resolution of 2 nm/],
    [40, null, null],
    [30, 30, null],
  ])("pixels of %d nm with a tip of %s nm", (nm, tip, message) => {
    const notices = checkOrder(frames([["cooling", [180]]]), { xNm: nm, yNm: nm }, tip);
    if (message === null) expect(notices).toEqual([]);
    else expect(notices.map((n) => `${n.frame} ${n.code} ${n.message}`)).toEqual([expect.stringMatching(message)]);
  });
});
