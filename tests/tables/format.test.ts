import { expect, test } from "vitest";
import { formatTable } from "../../src/tables/format.js";
import type { ExportedTable } from "../../src/tables/columns.js";

const table: ExportedTable = {
  name: "things",
  view: "things",
  row: "one thing",
  orderBy: ["a"],
  columns: [
    { name: "a", means: "" },
    { name: "b", means: "" },
  ],
};
const text = (rows: Record<string, number | string | null>[], format: "csv" | "tsv" | "json"): string =>
  [...formatTable(table, rows, format)].join("");

test("csv and tsv have a header, and an empty field for a missing value", () => {
  expect(text([{ a: 1.5, b: null }], "csv")).toBe("a,b\n1.5,\n");
  expect(text([{ a: "x,y", b: -2 }], "csv")).toBe('a,b\n"x,y",-2\n');
  expect(text([{ a: "x", b: 2 }], "tsv")).toBe("a\tb\nx\t2\n");
  expect(text([], "csv")).toBe("a,b\n");
});

test("json is an array of objects with null for a missing value", () => {
  expect(JSON.parse(text([{ a: 1, b: null }], "json"))).toEqual([{ a: 1, b: null }]);
  expect(JSON.parse(text([], "json"))).toEqual([]);
});

test("a name that a spreadsheet would run as a formula is kept as text; negative numbers are left alone", () => {
  expect(text([{ a: "=cmd|' /C calc'!A0", b: -3 }], "csv")).toBe("a,b\n'=cmd|' /C calc'!A0,-3\n");
  expect(text([{ a: "@x", b: "+1" }], "csv")).toBe("a,b\n'@x,'+1\n");
});

test("numbers keep all their digits", () => {
  expect(text([{ a: 0.1 + 0.2, b: 1e-9 }], "csv")).toBe("a,b\n0.30000000000000004,1e-9\n");
});

test("cells in the order of the columns give the same text as cells by name", () => {
  for (const format of ["csv", "tsv", "json"] as const) {
    const byName = [...formatTable(table, [{ a: "=1", b: null }], format)].join("");
    expect([...formatTable(table, [["=1", null]], format)].join("")).toBe(byName);
  }
});

test("a table longer than a batch is whole", () => {
  const rows = Array.from({ length: 137 }, (_, k) => [k, "x"]);
  expect([...formatTable(table, rows, "csv")].join("").split("\n")).toHaveLength(139);
});
