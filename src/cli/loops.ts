import { plainText } from "../model/text.js";
import type { Db } from "../store/open.js";
import { readTable, type Row, type Selection } from "../store/read.js";
import { tableNamed, type ExportedTable } from "../tables/columns.js";
import { loopPlot, type LoopPoint } from "./loop_plot.js";
import { fixed, intervalText, noHalf } from "./summary.js";
import { emptyText, openSelected, type SelectOptions } from "./select.js";
import { print } from "./say.js";

const num = (r: Row, k: string): number | null => (typeof r[k] === "number" ? r[k] : null);

const keyOf = (r: Row): string => `${String(r["analysis"])} ${String(r["cycle"])}`;

/** What the plots need of each frame, gathered in one pass: a database of years holds thousands. */
function framesByCycle(db: Db, selection: Selection): Map<string, Row[]> {
  const out = new Map<string, Row[]>();
  const columns = ["analysis", "cycle", "branch", "temperature_K", "metallic_fraction"];
  for (const f of readTable(db, tableNamed("temperature") as ExportedTable, selection, columns)) {
    const cycle = out.get(keyOf(f));
    if (cycle === undefined) out.set(keyOf(f), [f]);
    else cycle.push(f);
  }
  return out;
}

/** `coldseam loops`: half temperatures, width and area of every cycle, each with a plot of the loop. */
export function loops(o: SelectOptions & { format: string }): void {
  const { db, selection } = openSelected(o);
  try {
    const rows = [...readTable(db, tableNamed("loops") as ExportedTable, selection)];
    if (o.format === "json") {
      print(`${JSON.stringify(rows, null, 2)}\n`);
      return;
    }
    if (rows.length === 0)
      print(`${emptyText(db) ?? "no loop for this choice; `coldseam cooldowns --db FILE` says what is in the file"}\n`);
    const framesOf = rows.length === 0 ? new Map<string, Row[]>() : framesByCycle(db, selection);
    for (const r of rows) {
      const cycle = framesOf.get(keyOf(r)) ?? [];
      const none = noHalf(cycle.map((f) => ({ branch: String(f["branch"]), fraction: num(f, "metallic_fraction") })));
      print(`${plainText(String(r["cooldown"]))}  cycle ${String(r["cycle"])}  (analysis ${String(r["analysis"])})\n`);
      print(
        `  half temperature, cooling  ${intervalText(num(r, "cooling_half_K"), num(r, "cooling_half_low_K"), num(r, "cooling_half_high_K"), none.cooling, 2)}\n`,
      );
      print(
        `  half temperature, warming  ${intervalText(num(r, "warming_half_K"), num(r, "warming_half_low_K"), num(r, "warming_half_high_K"), none.warming, 2)}\n`,
      );
      print(
        `  loop width                 ${intervalText(num(r, "width_K"), num(r, "width_low_K"), num(r, "width_high_K"), none.width, 2)}\n`,
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
