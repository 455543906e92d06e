import type { Analysis } from "../../src/model/analysis.js";
import { openForWriting } from "../../src/store/open.js";
import { saveAnalysis } from "../../src/store/save.js";

/** A database of analyses made by hand, each a day after the one before, from the first of January on. */
export function madeDatabase(file: string, ...analyses: Analysis[]): string {
  const db = openForWriting(file);
  try {
    analyses.forEach((a, k) => saveAnalysis(db, a, new Date(Date.UTC(2026, 0, 1 + k))));
  } finally {
    db.close();
  }
  return file;
}
