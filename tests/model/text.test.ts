import { expect, test } from "vitest";
import { closestWord, countOf, plainText } from "../../src/model/text.js";

test.each([
  ["KV-14 (µm), Δφ, 160 K, 日本", "KV-14 (µm), Δφ, 160 K, 日本"],
  ["\x1b[31mred", "\\x1b[31mred"],
  ["bell\x07 line\nbreak\r tab\t", "bell\\x07 line\\x0abreak\\x0d tab\\x09"],
  ["\x7f\x9b", "\\x7f\\x9b"],
  ["abc\u202egpj.exe", "abc\\u202egpj.exe"],
  ["half \ud800 pair, whole 😀", "half \\ud800 pair, whole 😀"],
])("plainText(%j)", (from, to) => {
  expect(plainText(from)).toBe(to);
});

test.each([
  ["sampel", "sample"],
  ["resolution", "resolution_nm"],
  ["pixelsize", null],
  ["temperature_k", "temperature_K"],
  ["", null],
  ["zzzzzz", null],
])("closestWord(%j) is %j", (word, meant) => {
  expect(closestWord(word, ["sample", "resolution_nm", "temperature_K", "light"])).toBe(meant);
});

test("countOf", () => {
  expect([countOf(0, "frame"), countOf(1, "frame"), countOf(2, "entry", "entries")]).toEqual([
    "0 frames",
    "1 frame",
    "2 entries",
  ]);
});
