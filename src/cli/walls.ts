import { apparentWidths, type ApparentWidths } from "../figures/apparent.js";
import { plainText } from "../model/text.js";
import type { Db } from "../store/open.js";
import { analysesWithoutTip, readTable, type Row } from "../store/read.js";
import { tableNamed, type ExportedTable } from "../tables/columns.js";
import { emptyText, openSelected, type SelectOptions } from "./select.js";
import { print } from "./say.js";

const show = (v: unknown, digits: number, width: number): string =>
  (typeof v === "number" ? v.toFixed(digits) : "–").padStart(width);

const interval = (r: Row): string =>
  typeof r["wall_width_median_low_nm"] === "number" && typeof r["wall_width_median_high_nm"] === "number"
    ? `${r["wall_width_median_low_nm"].toFixed(1)} to ${r["wall_width_median_high_nm"].toFixed(1)}`
    : "–";

/** Apparent widths by analysis and frame, of analyses without a tip's resolution: where there is one, the median width says more. */
function apparentOf(db: Db, analyses: Iterable<number>): Map<string, ApparentWidths> {
  const out = new Map<string, ApparentWidths>();
  for (const analysis of analyses) {
    const frames = new Map<string, Row[]>();
    const columns = ["analysis", "frame", "flag", "apparent_width_nm"];
    for (const p of readTable(db, tableNamed("walls") as ExportedTable, { analysis }, columns)) {
      const frame = frames.get(keyOf(p));
      if (frame === undefined) frames.set(keyOf(p), [p]);
      else frame.push(p);
    }
    for (const [key, profiles] of frames) {
      const seen = apparentWidths(profiles);
      if (seen !== null) out.set(key, seen);
    }
  }
  return out;
}

const keyOf = (r: Row): string => `${String(r["analysis"])} ${String(r["frame"])}`;

/** `coldseam walls`: median width of every frame that has walls; of an analysis without a tip's resolution the apparent one. */
export function walls(o: SelectOptions & { format: string }): void {
  const { db, selection } = openSelected(o);
  try {
    const rows = [...readTable(db, tableNamed("temperature") as ExportedTable, selection)].filter(
      (r) => typeof r["wall_length_nm"] === "number" && r["wall_length_nm"] > 0,
    );
    const without = analysesWithoutTip(db, new Set(rows.map((r) => Number(r["analysis"]))));
    const apparent = apparentOf(db, without);
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
          rows.map((r) => {
            const seen = apparent.get(keyOf(r));
            return {
              ...Object.fromEntries(keys.map((k) => [k, r[k] ?? null])),
              apparent_width_median_nm: seen?.medianNm ?? null,
              apparent_width_lower_quartile_nm: seen?.lowQuartileNm ?? null,
              apparent_width_upper_quartile_nm: seen?.highQuartileNm ?? null,
            };
          }),
          null,
          2,
        )}\n`,
      );
      return;
    }
    if (rows.length === 0)
      print(`${emptyText(db) ?? "no walls for this choice: every frame is of one state, or undecided"}\n`);
    let last = "";
    for (const r of rows) {
      const head = `${plainText(String(r["cooldown"]))}, cycle ${String(r["cycle"])}, ${String(r["branch"])}`;
      if (head !== last) {
        print(`${last === "" ? "" : "\n"}${head}\n`);
        print(
          without.has(Number(r["analysis"]))
            ? "  frame  T / K   walls / um  profiles  median apparent width / nm  middle half\n"
            : "  frame  T / K   walls / um  profiles  median width / nm  95 % interval   limits\n",
        );
        last = head;
      }
      const length = typeof r["wall_length_nm"] === "number" ? r["wall_length_nm"] / 1000 : null;
      const start = `  ${show(r["frame"], 0, 5)}${show(r["temperature_K"], 1, 7)}${show(length, 2, 13)}${show(r["profiles"], 0, 10)}`;
      if (without.has(Number(r["analysis"]))) {
        const seen = apparent.get(keyOf(r));
        const half = seen === undefined ? "–" : `${seen.lowQuartileNm.toFixed(1)} to ${seen.highQuartileNm.toFixed(1)}`;
        print(`${start}${show(seen?.medianNm, 1, 28)}  ${half}\n`);
        continue;
      }
      const limits = typeof r["unresolved_share"] === "number" ? `${(100 * r["unresolved_share"]).toFixed(0)} %` : "–";
      print(`${start}${show(r["wall_width_median_nm"], 1, 19)}  ${interval(r).padEnd(15)}${limits.padStart(7)}\n`);
    }
    if (rows.some((r) => without.has(Number(r["analysis"]))))
      print(
        "\nApparent widths are 10-90 % widths as seen, the tip's blur in them, for want of\n" +
          "tip.resolution_nm. They bound the intrinsic widths from above. A quarter of the\n" +
          'profiles lies below the "middle half", a quarter above. Every profile:\n' +
          "coldseam export walls --db FILE\n",
      );
    if (rows.some((r) => !without.has(Number(r["analysis"]))))
      print(
        '\nWidths are intrinsic 10-90 % widths, the tip\'s blur taken out. "limits" is the\n' +
          "share of profiles that give only an upper limit; where it is over half, the\n" +
          "median is empty. Every profile: coldseam export walls --db FILE\n",
      );
  } finally {
    db.close();
  }
}
