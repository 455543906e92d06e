import { countOf, plainText, rangeOf } from "../model/text.js";
import { defaultDifferences } from "../settings.js";
import { openForReading } from "../store/open.js";
import { readCooldowns } from "../store/read.js";
import type { SettingRecord } from "../model/analysis.js";
import { print } from "./say.js";
import { emptyText } from "./select.js";

/** `coldseam cooldowns`: what is in a database. */
export function cooldowns(o: { db: string; format: string }): void {
  const db = openForReading(o.db);
  try {
    const rows = readCooldowns(db);
    if (o.format === "json") {
      print(
        `${JSON.stringify(
          rows.map(({ settings_json, ...r }) => ({ ...r, settings: JSON.parse(settings_json) as SettingRecord })),
          null,
          2,
        )}\n`,
      );
      return;
    }
    const empty = emptyText(db);
    if (empty !== null) print(`${empty}\n`);
    for (const r of rows) {
      print(`${plainText(r.cooldown)}\n`);
      print(
        `  sample ${plainText(r.sample)}, region ${plainText(r.region ?? "not named")}; ${countOf(r.frames, "frame")}, ${countOf(r.cycles, "cycle")}, ` +
          `${rangeOf(r.lowest_temperature_K, r.highest_temperature_K, "K")}\n`,
      );
      print(
        `  analysis ${r.analysis}${r.analyses > 1 ? ` (newest of ${r.analyses})` : ""}, ${r.made_at.slice(0, 16).replace("T", " ")} UTC, coldseam ${r.program_version}, ${countOf(r.notices, "note")}\n`,
      );
      const changed = defaultDifferences(JSON.parse(r.settings_json) as SettingRecord);
      if (changed.length > 0) print(`  settings changed: ${changed.join(", ")}\n`);
    }
  } finally {
    db.close();
  }
}
