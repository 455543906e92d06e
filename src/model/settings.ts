/** One setting, declared once beside its stage; help text, docs and the stored record come from it. */
export interface Setting {
  readonly default: number | string | boolean;
  /** "nm", "K", "1" for a pure number, "" for words. */
  readonly unit: string;
  readonly means: string;
  readonly min?: number;
  readonly max?: number;
  readonly choices?: readonly string[];
}

export type SettingTable = Readonly<Record<string, Setting>>;

type Widened<T> = T extends number ? number : T extends boolean ? boolean : T extends string ? string : never;

/** The values of a table of settings: `{ maxShiftNm: number, … }`. */
export type SettingValues<T extends SettingTable> = { readonly [K in keyof T]: Widened<T[K]["default"]> };

/** The defaults of a table. */
export function defaultsOf<T extends SettingTable>(table: T): SettingValues<T> {
  return Object.fromEntries(Object.entries(table).map(([k, v]) => [k, v.default])) as SettingValues<T>;
}
