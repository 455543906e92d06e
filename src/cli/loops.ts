import { plainText } from "../model/text.js";
import { readTable, type Row } from "../store/read.js";
import { tableNamed, type ExportedTable } from "../tables/columns.js";
import { loopPlot, type LoopPoint } from "./loop_plot.js";
import { intervalText, fixed } from "./summary.js";
import { openSelected, type SelectOptions } from "./select.js";
import { print } from "./say.js";

const num = (r: Row, k: string): number | null => (typeof r[k] === "number" ? r[k] : null);

/** `coldseam loops`: half temperatures, width and area of every cycle, each with a plot of the loop. */
export function loops(o: SelectOptions & { format: string }): void {
  const { db, selection } = openSelected(o);
  try {
    const rows = [...readTable(db, tableNamed("loops") as ExportedTable, selection)];
    if (o.format === "json") {
      print(`${JSON.stringify(rows, null, 2)}\n`);
      return;
    }
    if (rows.length === 0) print("no loop for this choice; `coldseam cooldowns --db FILE` says what is in the file\n");
    const frames = rows.length === 0 ? [] : [...readTable(db, tableNamed("temperature") as ExportedTable, selection)];
    for (const r of rows) {
      const cycle = frames.filter(
        (f) => f["cooldown"] === r["cooldown"] && f["cycle"] === r["cycle"] && f["analysis"] === r["analysis"],
      );
      print(`${plainText(String(r["cooldown"]))}  cycle ${String(r["cycle"])}  (analysis ${String(r["analysis"])})\n`);
      print(
        `  half temperature, cooling  ${intervalText(num(r, "cooling_half_K"), num(r, "cooling_half_low_K"), num(r, "cooling_half_high_K"), "K", 2)}\n`,
      );
      print(
        `  half temperature, warming  ${intervalText(num(r, "warming_half_K"), num(r, "warming_half_low_K"), num(r, "warming_half_high_K"), "K", 2)}\n`,
      );
      print(
        `  loop width                 ${intervalText(num(r, "width_K"), num(r, "width_low_K"), num(r, "width_high_K"), "K", 2)}\n`,
      );
      const area = num(r, "area_K");
      print(`  loop area                  ${area === null ? "none" : `${area.toFixed(2)} K`}\n`);
      print(
        `  metallic fraction from ${fixed(num(r, "lowest_fraction"), 3)} to ${fixed(num(r, "highest_fraction"), 3)}: ` +
          `${r["complete"] === 1 ? "a complete loop" : "not a complete loop; its width is not the major loop's"}\n`,
      );
      const points: LoopPoint[] = cycle.flatMap((f) =>
        typeof f["metallic_fraction"] === "number" && typeof f["temperature_K"] === "number"
          ? [
              {
                branch: f["branch"] === "cooling" ? "cooling" : "warming",
                temperatureK: f["temperature_K"],
                fraction: f["metallic_fraction"],
              },
            ]
          : [],
      );
      print(`${loopPlot(points)}\n`);
    }
  } finally {
    db.close();
  }
}
