import fc from "fast-check";
import { createHash } from "node:crypto";
import { describe, expect, test } from "vitest";
import { parse } from "yaml";
import { excludeSchema } from "../../src/input/schema.js";
import { ByteReader, ByteWriter, decodeTable, encodeTable } from "../../src/report/codec.js";
import type { ExclusionData } from "../../src/report/data.js";
import { reportDocument, safeJson } from "../../src/report/document.js";
import { excludeLines, LONGEST_REASON, reasonLine, regionWithin } from "../../src/report/exclude_lines.js";
import {
  decodeFringes,
  decodeProfiles,
  decodeWalls,
  encodeFringes,
  encodeProfiles,
  encodeWalls,
  STEP,
} from "../../src/report/frame_codec.js";
import type { PackedReport } from "../../src/report/pack.js";

const SEEDED = { seed: 2026, numRuns: 200 };
const number = fc.double({ noNaN: true, min: -1e6, max: 1e6 });

describe("tables as bytes", () => {
  const rows = fc.array(
    fc.record({ a: fc.option(number), word: fc.option(fc.string()), whole: fc.integer({ min: 0, max: 1 << 24 }) }),
  );

  test("come back with every digit where wide, with seven where not; empty cells stay empty, words are the same words", () => {
    fc.assert(
      fc.property(rows, fc.boolean(), (table, wide) => {
        const { head, bytes } = encodeTable(table, ["a", "word", "whole"], wide);
        const back = decodeTable(head, bytes);
        expect(back).toHaveLength(table.length);
        table.forEach((r, k) => {
          expect(back[k]["word"]).toBe(r.word);
          expect(back[k]["whole"]).toBe(r.whole);
          expect(back[k]["a"]).toBe(r.a === null || wide ? r.a : Math.fround(r.a));
        });
      }),
      SEEDED,
    );
  });

  test("a column with no value at all is empty", () => {
    const { head, bytes } = encodeTable([{ a: null }, {}], ["a"], true);
    expect(decodeTable(head, bytes)).toEqual([{ a: null }, { a: null }]);
  });
});

test("whole numbers of any size come back", () => {
  fc.assert(
    fc.property(fc.array(fc.integer({ min: -(2 ** 40), max: 2 ** 40 })), (values) => {
      const w = new ByteWriter();
      for (const v of values) w.signed(v);
      const r = new ByteReader(w.done());
      expect(values.map(() => r.signed())).toEqual(values);
    }),
    SEEDED,
  );
});

describe("what is drawn of a frame comes back to half a step", () => {
  const near = (a: ArrayLike<number>, b: ArrayLike<number>, steps: readonly number[]): void => {
    expect(a.length).toBe(b.length);
    // single precision adds a rounding of its own: one part in 2^24
    for (let k = 0; k < a.length; k++)
      expect(Math.abs(a[k] - b[k])).toBeLessThanOrEqual(0.5001 * steps[k % steps.length] + Math.abs(b[k]) * 6e-8);
  };
  const matrix = (columns: number, most: number): fc.Arbitrary<Float32Array> =>
    fc
      .array(fc.array(fc.double({ noNaN: true, min: -most, max: most }), { minLength: columns, maxLength: columns }))
      .map((v) => Float32Array.from(v.flat()));

  test("walls", () => {
    fc.assert(
      fc.property(matrix(2, 6000), fc.boolean(), (points, closed) => {
        const [wall] = decodeWalls(encodeWalls([{ wall: 300, closed, lengthNm: 12.5, points }]));
        expect(wall).toMatchObject({ wall: 300, closed, lengthNm: 12.5 });
        near(wall.points, points, [STEP.placeNm, STEP.placeNm]);
      }),
      SEEDED,
    );
  });

  test("profiles", () => {
    fc.assert(
      fc.property(matrix(3, 300), (bins) => {
        const [first, second] = decodeProfiles(
          encodeProfiles([
            { wall: 1, profile: 200, wNm: 40.5, sigmaNm: 12.75, bins },
            { wall: 2, profile: 0, wNm: 0, sigmaNm: 0, bins: [] },
          ]),
        );
        expect(first).toMatchObject({ wall: 1, profile: 200, wNm: 40.5, sigmaNm: 12.75 });
        near(first.bins, bins, [STEP.placeNm, STEP.share, STEP.shareSd]);
        expect(second).toMatchObject({ wall: 2, profile: 0, bins: new Float32Array() });
      }),
      SEEDED,
    );
  });

  test("fringes", () => {
    const s = STEP.signal;
    fc.assert(
      fc.property(matrix(8, 400), (bins) => {
        const [f] = decodeFringes(encodeFringes([{ wall: 0, stretch: 3, metallicRe: 2.5, metallicIm: -0.5, bins }]));
        expect(f).toMatchObject({ wall: 0, stretch: 3, metallicRe: 2.5, metallicIm: -0.5 });
        near(f.bins, bins, [STEP.placeNm, s, s, STEP.phaseSdRad, s, s, s, s]);
      }),
      SEEDED,
    );
  });
});

describe("lines of corrections", () => {
  const reason = fc.oneof(fc.string({ unit: "binary", maxLength: 500 }), fc.string({ maxLength: 500 })).map(reasonLine);
  const nm = number.map((v) => v + 0); // no minus zero: YAML has none
  const region = fc.tuple(nm, nm, nm, nm);
  const entries = fc.array(
    fc.record({
      frame: fc.nat(500),
      regionNm: fc.option(region),
      reason: reason.filter((r) => r !== ""),
    }) satisfies fc.Arbitrary<ExclusionData>,
  );

  test("are read back as they were meant, whatever the reason holds", () => {
    fc.assert(
      fc.property(entries, entries, (stored, added) => {
        const text = excludeLines(stored, added);
        const read = excludeSchema.parse((parse(text) as { exclude?: unknown } | null)?.exclude ?? []);
        expect(read.map((e) => ({ frame: e.frame, regionNm: e.region_nm ?? null, reason: e.reason }))).toEqual([
          ...stored,
          ...added,
        ]);
      }),
      SEEDED,
    );
  });

  test("a reason is one line of at most as many characters as may be, without control characters", () => {
    fc.assert(
      fc.property(fc.string({ unit: "binary", maxLength: 900 }), (text) => {
        const line = reasonLine(text);
        expect(Array.from(line).length).toBeLessThanOrEqual(LONGEST_REASON);
        // oxlint-disable-next-line no-control-regex -- that there is none is what is tested
        expect(line).not.toMatch(/[\u0000-\u001f\u007f]/);
        expect(line).toBe(line.trim());
      }),
      SEEDED,
    );
    expect(reasonLine("  tip \n changed ")).toBe("tip changed");
    expect(reasonLine(" \n ")).toBe("");
  });

  test("a region is cut at the frame, corners in any order, and is none outside it", () => {
    const size = { xNm: 630, yNm: 310 };
    expect(regionWithin([700, 300, -20, 12.34], size)).toEqual([0, 12.3, 630, 300]);
    expect(regionWithin([-50, 0, -1, 100], size)).toBeNull();
    expect(regionWithin([0, 311, 50, 400], size)).toBeNull();
  });

  test("nothing left out makes no entry", () => {
    expect(excludeLines([], [])).toBe("");
  });
});

describe("the file", () => {
  const hostile = `</script><img src=x onerror="hit=1"><!--\u2028`;
  const packed = {
    index: { programVersion: "1", cooldowns: [{ info: { cooldown: hostile } }] },
    chunks: ["QUJD"],
  } as unknown as PackedReport;
  const text = [...reportDocument(packed, { script: "let a = 1 < 2;", style: "p { margin: 0 }" })].join("");

  test("holds names only as text that no parser takes for anything else", () => {
    expect(text).not.toContain("<img");
    expect(text.match(/<\/script/g)).toHaveLength(3);
    expect(text).not.toContain("<!--");
    const json = /id="index">(.*)<\/script>/.exec(text)?.[1] ?? "";
    expect((JSON.parse(json) as PackedReport["index"]).cooldowns[0].info.cooldown).toBe(hostile);
    expect(safeJson({ a: hostile })).not.toMatch(/[<\u2028]/);
  });

  test("allows its own script and style, by their hashes, and nothing from anywhere else", () => {
    const hash = (s: string): string => createHash("sha256").update(s).digest("base64");
    const policy = /Content-Security-Policy" content="([^"]*)"/.exec(text)?.[1] ?? "";
    expect(policy).toContain("default-src 'none'");
    expect(policy).toContain(`script-src 'sha256-${hash("let a = 1 < 2;")}'`);
    expect(policy).toContain(`style-src 'sha256-${hash("p { margin: 0 }")}'`);
    expect(policy).not.toMatch(/unsafe|http|\*/);
  });

  test("a bundle that would end its own element is refused", () => {
    expect(() => [...reportDocument(packed, { script: `x = "</script>"`, style: "" })].join("")).toThrow(/inside/);
  });
});
