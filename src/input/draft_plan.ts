import type { Branch } from "../model/cooldown.js";
import { countOf } from "../model/text.js";
import type { FoundImage } from "./draft_collect.js";
import { KNOWN_WORDS, tellingWords } from "./file_names.js";
import { IMAGE_KEYS, type ImageKey } from "./schema.js";
import { signalProblem } from "./signal_form.js";

/** A frame of a table: one file an image, at one temperature. */
export interface PlannedRow {
  readonly temperatureK: number;
  readonly files: Partial<Record<ImageKey, string>>;
}

/** One series as far as the names tell it: rows for a table (one table a harmonic), or stacks. */
export interface PlannedSeries {
  readonly branch: Branch | null;
  /** The word that the branch was taken from where it may mean something else (`down`), or by which files without one were kept apart. */
  readonly word: string | null;
  readonly cycle: number | null;
  readonly tables: readonly { readonly harmonic: number | null; readonly rows: readonly PlannedRow[] }[];
  /** Each image's file; several where a harmonic must be chosen. */
  readonly stacks: Partial<Record<ImageKey, readonly FoundImage[]>> | null;
}

export interface Plan {
  readonly series: readonly PlannedSeries[];
  readonly harmonics: readonly number[];
  readonly unplaced: readonly Unplaced[];
}

export interface Unplaced {
  readonly written: string;
  readonly why: string;
  readonly fix: string;
}

const BY_HAND = "write cooldown.yaml by hand";
/** Said once, not beside every file. */
export const NO_CHANNEL = {
  why: "no word for a channel in its name",
  fix:
    `put a word for the channel into the names (${KNOWN_WORDS.channels.join(", ")}), and one for the branch ` +
    `(${KNOWN_WORDS.branches.join(", ")}); or ${BY_HAND}`,
};
const NO_TEMPERATURE = {
  why: "no temperature in its name (as in 165K, T165, 165p5K)",
  fix: `write the temperature into the names as 165K, T165 or 165p5K; or ${BY_HAND}`,
};

interface Placed {
  readonly found: FoundImage;
  readonly image: ImageKey;
}

/** Sorts images into series by what their names say. What a name leaves open is not placed, and why is said. */
export function planSeries(images: readonly FoundImage[]): Plan {
  const unplaced: Unplaced[] = [];
  const leave = (found: FoundImage, why: string, fix = BY_HAND): void =>
    void unplaced.push({ written: found.written, why, fix });
  const single: Placed[] = [];
  const stacked: Placed[] = [];
  for (const found of images) {
    const { parts } = found;
    // Complex numbers can be nothing but the signal.
    const image = parts.image ?? (found.complex ? "signal" : null);
    if (parts.doubts.length > 0) leave(found, `its name says two things: ${parts.doubts.join("; ")}`);
    else if (image === null && found.planes > 1) leave(found, `${found.planes} samples a pixel: name one as FILE#0:0`);
    else if (image === null) leave(found, NO_CHANNEL.why, NO_CHANNEL.fix);
    else if (found.complex !== (image === "signal"))
      leave(
        found,
        found.complex ? "complex numbers can only be a signal" : "a signal has complex numbers, this real ones",
      );
    else if (found.planes > 1 && !found.complex) leave(found, `${found.planes} samples a pixel: name one as FILE#0:0`);
    else if (found.pages > 1 && parts.temperatureK !== null)
      leave(found, `a stack of ${found.pages} pages at one temperature`, `${BY_HAND}, with temperatures_K`);
    else if (found.pages > 1) stacked.push({ found, image });
    else if (parts.temperatureK === null) leave(found, NO_TEMPERATURE.why, NO_TEMPERATURE.fix);
    else single.push({ found, image });
  }
  const series: PlannedSeries[] = [];
  const inSeries = (p: Placed): string => `${p.found.parts.cycle} ${p.found.parts.branch}`;
  for (const list of groupBy(single, inSeries).values()) {
    const { branch, cycle } = list[0].found.parts;
    for (const { word, members } of branch === null ? keptApart(list, 2) : [told(list)]) {
      const tables = tablesOf(members, branch, leave);
      if (tables.length > 0) series.push({ branch, word, cycle, tables, stacks: null });
    }
  }
  for (const list of groupBy(stacked, inSeries).values()) {
    const { branch, cycle } = list[0].found.parts;
    for (const { word, members } of branch === null ? keptApart(list, 1) : [told(list)])
      for (const stacks of stacksOf(members, leave)) series.push({ branch, word, cycle, tables: [], stacks });
  }
  const rank = (s: PlannedSeries): number =>
    (s.cycle ?? 0) * 10 + (s.branch === "cooling" ? 0 : s.branch === "warming" ? 1 : 2);
  series.sort((a, b) => rank(a) - rank(b));
  const harmonics = new Set(series.flatMap(harmonicsOf));
  return { series, harmonics: [...harmonics].sort((a, b) => a - b), unplaced };
}

interface Group {
  readonly word: string | null;
  readonly members: readonly Placed[];
}

/** The files of one branch, with the word of a direction where all is known from that. */
function told(list: readonly Placed[]): Group {
  const words = new Set(list.map((p) => p.found.parts.direction));
  return { word: words.has(null) ? null : [...words].join(", "), members: list };
}

/**
 * Files that say no branch, kept apart by the words in which the files of one channel differ: these may be the names of the branches.
 * Words that all files of a channel have, and those of fewer than `least` temperatures (or stacks), say nothing.
 */
function keptApart(list: readonly Placed[], least: number): Group[] {
  const telling = new Map<Placed, readonly string[]>();
  const reach = new Map<string, Set<number | string>>();
  for (const channel of groupBy(list, (p) => p.image).values()) {
    const words = channel.map((p) => tellingWords(p.found.parts.rest));
    const common = new Set(words[0]?.filter((w) => words.every((other) => other.includes(w))));
    channel.forEach((p, k) => {
      const own = (words[k] ?? []).filter((w) => !common.has(w));
      telling.set(p, own);
      for (const w of own) reach.set(w, (reach.get(w) ?? new Set()).add(p.found.parts.temperatureK ?? p.found.written));
    });
  }
  const keyOf = (p: Placed): string =>
    (telling.get(p) ?? []).filter((w) => (reach.get(w)?.size ?? 0) >= least).join(" ");
  const groups = groupBy(list, keyOf);
  if (groups.size === 1) return [{ word: null, members: list }];
  // What lacks the words of the others (one topography for all) is a group of its own: nothing says to which it belongs.
  return [...groups].map(([word, members]) => ({ word, members }));
}

function harmonicsOf(s: PlannedSeries): number[] {
  const stacks = Object.values(s.stacks ?? {}).flatMap((list) => list.map((f) => f.parts.harmonic));
  return [...s.tables.map((t) => t.harmonic), ...stacks].filter((h) => h !== null);
}

function tablesOf(
  list: readonly Placed[],
  branch: Branch | null,
  leave: (found: FoundImage, why: string) => void,
): { harmonic: number | null; rows: PlannedRow[] }[] {
  const named = [...new Set(list.map((p) => p.found.parts.harmonic).filter((h) => h !== null))].sort((a, b) => a - b);
  const used = new Set<FoundImage>();
  const reasons = new Map<FoundImage, string>();
  const tables = (named.length === 0 ? [null] : named).map((harmonic) => {
    // What has no harmonic in its name (the topography) belongs to each.
    const here = list.filter((p) => p.found.parts.harmonic === harmonic || p.found.parts.harmonic === null);
    const rows = rowsOf(here, used, reasons);
    const sign = branch === "warming" ? 1 : -1;
    return { harmonic, rows: rows.sort((a, b) => sign * (a.temperatureK - b.temperatureK)) };
  });
  for (const { found } of list) if (!used.has(found)) leave(found, reasons.get(found) ?? "not placed");
  return tables.filter((t) => t.rows.length > 0);
}

function rowsOf(list: readonly Placed[], used: Set<FoundImage>, reasons: Map<FoundImage, string>): PlannedRow[] {
  const byTemperature = groupBy(list, (p) => p.found.parts.temperatureK ?? NaN);
  return [...byTemperature].flatMap(([temperatureK, here]) => {
    // Several scans at one temperature are told apart by what else is in their names, alike in all their channels.
    const groups = isRow(here) ? [here] : [...groupBy(here, (p) => p.found.parts.rest.join(" ")).values()];
    return groups.flatMap((group) => {
      const twice = group.find((p, k) => group.findIndex((q) => q.image === p.image) !== k);
      const files: Partial<Record<ImageKey, string>> = {};
      for (const p of group) files[p.image] = p.found.written;
      const wrong = twice === undefined ? signalProblem(files) : null;
      if (twice === undefined && wrong === null) {
        for (const p of group) used.add(p.found);
        return [{ temperatureK, files }];
      }
      const why =
        twice !== undefined
          ? `several files for ${twice.image} at ${temperatureK} K that the names do not tell apart`
          : wrong === "none" || wrong === null
            ? `no amplitude beside it at ${temperatureK} K`
            : wrong.problem;
      for (const p of group) reasons.set(p.found, why);
      return [];
    });
  });
}

const isRow = (list: readonly Placed[]): boolean => new Set(list.map((p) => p.image)).size === list.length;

/** Stacks that belong together: of one length, and one file an image or one a harmonic. */
function stacksOf(
  list: readonly Placed[],
  leave: (found: FoundImage, why: string) => void,
): Partial<Record<ImageKey, FoundImage[]>>[] {
  const byLength = groupBy(list, (p) => p.found.pages);
  return [...byLength].flatMap(([pages, here]) => {
    const stacks: Partial<Record<ImageKey, FoundImage[]>> = {};
    for (const key of IMAGE_KEYS) {
      const files = here.filter((p) => p.image === key).map((p) => p.found);
      if (files.length > 0) stacks[key] = files;
    }
    const unclear = Object.values(stacks).find(
      (files) => new Set(files.map((f) => f.parts.harmonic)).size !== files.length,
    );
    const wrong = signalProblem(stacks);
    if (unclear === undefined && wrong === null) return [stacks];
    const why =
      unclear !== undefined
        ? `${countOf(unclear.length, "stack")} of ${pages} pages for one channel that the names do not tell apart`
        : wrong === "none" || wrong === null
          ? `no amplitude beside this stack of ${pages} pages`
          : wrong.problem;
    for (const p of here) leave(p.found, why);
    return [];
  });
}

function groupBy<T, K>(list: readonly T[], key: (item: T) => K): Map<K, T[]> {
  const out = new Map<K, T[]>();
  for (const item of list) {
    const group = out.get(key(item));
    if (group === undefined) out.set(key(item), [item]);
    else group.push(item);
  }
  return out;
}
