import { plainText } from "../model/text.js";
import { readTable, type Row } from "../store/read.js";
import { tableNamed, type ExportedTable } from "../tables/columns.js";
import { openSelected, type SelectOptions } from "./select.js";
import { print } from "./say.js";

const show = (v: unknown, digits: number, width: number): string =>
  (typeof v === "number" ? v.toFixed(digits) : "–").padStart(width);

const interval = (r: Row): string =>
  typeof r["wall_width_median_low_nm"] === "number" && typeof r["wall_width_median_high_nm"] === "number"
    ? `${r["wall_width_median_low_nm"].toFixed(1)} to ${r["wall_width_median_high_nm"].toFixed(1)}`
    : "–";

/** `coldseam walls`: median width of every frame that has walls. */
export function walls(o: SelectOptions & { format: string }): void {
  const { db, selection } = openSelected(o);
  try {
    const rows = [...readTable(db, tableNamed("temperature") as ExportedTable, selection)].filter(
      (r) => typeof r["wall_length_nm"] === "number" && r["wall_length_nm"] > 0,
    );
    if (o.format === "json") {
      const keys = [
        "cooldown",
        "branch",
        "cycle",
        "frame",
        "temperature_K",
        "wall_length_nm",
        "profiles",
        "wall_width_median_nm",
        "wall_width_median_low_nm",
        "wall_width_median_high_nm",
        "unresolved_share",
        "fringe_share",
        "analysis",
      ];
      print(
        `${JSON.stringify(
          rows.map((r) => Object.fromEntries(keys.map((k) => [k, r[k] ?? null]))),
          null,
          2,
        )}\n`,
      );
      return;
    }
    if (rows.length === 0) print("no walls for this choice: every frame is of one state, or undecided\n");
    let last = "";
    for (const r of rows) {
      const head = `${plainText(String(r["cooldown"]))}, cycle ${String(r["cycle"])}, ${String(r["branch"])}`;
      if (head !== last) {
        print(`${last === "" ? "" : "\n"}${head}\n`);
        print("  frame  T / K   walls / um  profiles  median width / nm  95 % interval   limits\n");
        last = head;
      }
      const length = typeof r["wall_length_nm"] === "number" ? r["wall_length_nm"] / 1000 : null;
      const limits = typeof r["unresolved_share"] === "number" ? `${(100 * r["unresolved_share"]).toFixed(0)} %` : "–";
      print(
        `  ${show(r["frame"], 0, 5)}${show(r["temperature_K"], 1, 7)}${show(length, 2, 13)}${show(r["profiles"], 0, 10)}` +
          `${show(r["wall_width_median_nm"], 1, 19)}  ${interval(r).padEnd(15)}${limits.padStart(7)}\n`,
      );
    }
    if (rows.length > 0)
      print(
        '\nWidths are intrinsic 10-90 % widths, the tip\'s blur taken out. "limits" is the\n' +
          "share of profiles that give only an upper limit; where it is over half, the\n" +
          "median is empty. Every profile: coldseam export walls --db FILE\n",
      );
  } finally {
    db.close();
  }
}
