// How the figures are printed: each beside its goal, where it has one.

/** `met` or `NOT met` against "at most" or "at least"; a goal is no test, the bench's exit code does not depend on it. */
export const atMost = (value, goal, unit = "") => verdict(value <= goal, `≤ ${goal}${unit}`);
export const atLeast = (value, goal, unit = "") => verdict(value >= goal, `≥ ${goal}${unit}`);
const verdict = (met, goal) => `[goal ${goal}: ${met ? "met" : "NOT met"}]`;

export const seconds = (s) => (s < 0.1 ? `${(1000 * s).toFixed(1)} ms` : `${s.toFixed(2)} s`);

/** Rows of cells in columns, the first to the left, the others to the right. */
export function printTable(rows, indent = "  ") {
  const width = rows[0].map((_, j) => Math.max(...rows.map((r) => String(r[j] ?? "").length)));
  for (const r of rows)
    console.log(
      indent +
        r
          .map((c, j) => (j === 0 ? String(c).padEnd(width[j]) : String(c ?? "").padStart(width[j])))
          .join("  ")
          .trimEnd(),
    );
}
