import { UsageError } from "./model/errors.js";
import type { SettingRecord } from "./model/analysis.js";
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
  seed: { default: 20261, unit: "1", means: "seed of every random draw (bootstraps, simulated null distributions)", min: 0, max: 2147483647 },
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

function nearest(word: string, choices: readonly string[]): string {
  const distance = (a: string, b: string): number => {
    let row = Array.from({ length: b.length + 1 }, (_, j) => j);
    for (let i = 1; i <= a.length; i++) {
      const next = [i];
      for (let j = 1; j <= b.length; j++)
        next[j] = Math.min((row[j] as number) + 1, (next[j - 1] as number) + 1, (row[j - 1] as number) + (a[i - 1] === b[j - 1] ? 0 : 1));
      row = next;
    }
    return row[b.length] as number;
  };
  return [...choices].sort((p, q) => distance(word, p) - distance(word, q))[0] as string;
}

function parseValue(s: ListedSetting, text: string): number | string | boolean {
  const bad = (expected: string): never => {
    throw new UsageError(`--set ${s.name}=${text}: expected ${expected}`, `its default is ${String(s.default)} (${s.means})`);
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
    if (at < 0) throw new UsageError(`--set ${o}: expected NAME=VALUE`, "for example --set walls.reachNm=400; `coldseam settings` lists all");
    if (s === undefined)
      throw new UsageError(`--set ${o}: no setting "${name}"`, `did you mean "${nearest(name, all.map((x) => x.name))}"? \`coldseam settings\` lists all`);
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
