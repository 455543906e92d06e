import { UsageError } from "./model/errors.js";
import type { SettingRecord } from "./model/analysis.js";
import { closestWord } from "./model/text.js";
import { defaultsOf, type Setting, type SettingTable, type SettingValues } from "./model/settings.js";
import { settings as clean } from "./stages/clean/settings.js";
import { settings as debris } from "./stages/debris/settings.js";
import { settings as domains } from "./stages/domains/settings.js";
import { settings as drift } from "./stages/drift/settings.js";
import { settings as fringes } from "./stages/fringes/settings.js";
import { settings as loops } from "./stages/loops/settings.js";
import { settings as states } from "./stages/states/settings.js";
import { settings as walls } from "./stages/walls/settings.js";

const run = {
  seed: {
    default: 20261,
    unit: "1",
    means: "seed of every random draw (bootstraps, simulated null distributions)",
    min: 0,
    max: 2147483647,
  },
} as const satisfies SettingTable;

/** Every setting of the program, by the stage that it belongs to. */
export const SETTING_TABLES = { run, clean, drift, debris, states, walls, fringes, domains, loops } as const;

type Tables = typeof SETTING_TABLES;
export type Settings = { readonly [K in keyof Tables]: SettingValues<Tables[K]> };

export interface ListedSetting extends Setting {
  /** `walls.reachNm` */
  readonly name: string;
}

export function listSettings(): ListedSetting[] {
  return Object.entries(SETTING_TABLES).flatMap(([stage, table]) =>
    Object.entries(table as SettingTable).map(([key, s]) => ({ name: `${stage}.${key}`, ...s })),
  );
}

function parseValue(s: ListedSetting, text: string): number | string | boolean {
  const bad = (expected: string): never => {
    throw new UsageError(
      `--set ${s.name}=${text}: expected ${expected}`,
      `its default is ${String(s.default)} (${s.means})`,
    );
  };
  if (typeof s.default === "boolean") return text === "true" ? true : text === "false" ? false : bad("true or false");
  if (typeof s.default === "string") {
    if (s.choices !== undefined && !s.choices.includes(text)) bad(`one of ${s.choices.join(", ")}`);
    return text;
  }
  const v = text.trim() === "" ? Number.NaN : Number(text);
  if (!Number.isFinite(v)) bad("a number");
  if (s.min !== undefined && v < s.min) bad(`at least ${s.min}`);
  if (s.max !== undefined && v > s.max) bad(`at most ${s.max}`);
  return v;
}

/** The settings with some changed: `["walls.reachNm=400"]`. Throws UsageError on an unknown name or a value of the wrong kind. */
export function settingsWith(overrides: readonly string[] = []): Settings {
  const all = listSettings();
  const values: Record<string, Record<string, number | string | boolean>> = Object.fromEntries(
    Object.entries(SETTING_TABLES).map(([stage, table]) => [stage, { ...defaultsOf(table as SettingTable) }]),
  );
  for (const o of overrides) {
    const at = o.indexOf("=");
    const name = at < 0 ? o : o.slice(0, at);
    const s = all.find((x) => x.name === name);
    if (at < 0)
      throw new UsageError(
        `--set ${o}: expected NAME=VALUE`,
        "for example --set walls.reachNm=400; `coldseam settings` lists all",
      );
    if (s === undefined) {
      const meant = closestWord(
        name,
        all.map((x) => x.name),
      );
      throw new UsageError(
        `--set ${o}: no setting "${name}"${meant === null ? "" : `; did you mean "${meant}"?`}`,
        "`coldseam settings` lists all",
      );
    }
    const [stage, key] = name.split(".") as [string, string];
    (values[stage] as Record<string, number | string | boolean>)[key] = parseValue(s, o.slice(at + 1));
  }
  return values as Settings;
}

/** The full set by dotted name, as stored with each analysis. */
export function settingRecord(s: Settings): SettingRecord {
  return Object.fromEntries(
    Object.entries(s).flatMap(([stage, table]) =>
      Object.entries(table as Record<string, number | string | boolean>).map(([k, v]) => [`${stage}.${k}`, v]),
    ),
  );
}

/** The stored settings that differ from this program's defaults, as `name=value`. */
export function defaultDifferences(record: SettingRecord): string[] {
  const defaults = settingRecord(settingsWith());
  return Object.entries(record)
    .filter(([k, v]) => defaults[k] !== v)
    .map(([k, v]) => `${k}=${String(v)}`);
}
