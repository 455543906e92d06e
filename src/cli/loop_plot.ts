export interface LoopPoint {
  readonly branch: "cooling" | "warming";
  readonly temperatureK: number;
  readonly fraction: number;
}

/** A loop in text, at most 78 columns: `v` cooling, `^` warming, `#` where both fall together. */
export function loopPlot(points: readonly LoopPoint[], width = 66, height = 13): string {
  if (points.length === 0) return "  (no frame with a metallic fraction)\n";
  const temps = points.map((p) => p.temperatureK);
  const low = Math.min(...temps);
  const high = Math.max(...temps);
  const span = high > low ? high - low : 1;
  const grid = Array.from({ length: height }, () => Array.from({ length: width }, () => " "));
  for (const p of points) {
    const col = Math.round(((p.temperatureK - low) / span) * (width - 1));
    const row = Math.round((1 - p.fraction) * (height - 1));
    const line = grid[row] as string[];
    const mark = p.branch === "cooling" ? "v" : "^";
    line[col] = line[col] === " " || line[col] === mark ? mark : "#";
  }
  const middle = (height - 1) / 2;
  const lines = grid.map((cells, row) => {
    const label = row === 0 ? "1.0" : row === middle ? "0.5" : row === height - 1 ? "0.0" : "   ";
    return `  ${label} |${cells.join("").trimEnd()}`;
  });
  const left = low.toFixed(1);
  const right = `${high.toFixed(1)} K`;
  const label = "v cooling  ^ warming  # both";
  const gap = Math.max(1, Math.floor((width - left.length - right.length - label.length) / 2));
  return [
    "  metallic fraction",
    ...lines,
    `      +${"-".repeat(width)}`,
    `       ${left}${" ".repeat(gap)}${label}${" ".repeat(Math.max(1, width - left.length - right.length - label.length - gap))}${right}`,
    "",
  ].join("\n");
}
