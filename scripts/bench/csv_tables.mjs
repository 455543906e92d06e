// Exported tables as CSV files in a folder, read back as rows.
import { readFileSync } from "node:fs";
import path from "node:path";
import { parse } from "csv-parse/sync";

const WORDS = new Set(["cooldown", "branch", "flag", "side", "kind", "origin", "fate"]);

/** The rows of a table by its name; empty fields are null, numbers are numbers. */
export const tablesIn = (folder) => (name) =>
  parse(readFileSync(path.join(folder, `${name}.csv`)), { columns: true }).map((r) =>
    Object.fromEntries(Object.entries(r).map(([k, v]) => [k, WORDS.has(k) ? v : v === "" ? null : Number(v)])),
  );
