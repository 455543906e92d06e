import type { PixelSize } from "../model/raster.js";
import { countOf, plainText } from "../model/text.js";
import type { Collected, FoundImage } from "./draft_collect.js";
import { NO_CHANNEL, type Plan, type PlannedRow, type PlannedSeries } from "./draft_plan.js";
import { samePixel } from "./image_headers.js";
import { IMAGE_KEYS, type ImageKey } from "./schema.js";

export interface DraftFile {
  readonly name: string;
  readonly text: string;
}

/** A drafted description: the YAML file first, then its tables. */
export interface Draft {
  readonly files: readonly DraftFile[];
  readonly series: number;
  readonly frames: number;
  /** Places marked FILL. */
  readonly toFill: number;
  readonly unplaced: number;
}

/** Text as YAML takes it whatever is in it: a JSON string. */
const quoted = (s: string): string => JSON.stringify(s);
/** A name in a comment: on its line, whatever is in it. */
const said = (s: string): string => plainText(s);

/** Writes a plan out as a commented `cooldown.yaml` and its tables. What the names did not tell is left empty and marked FILL. */
export function draftText(name: string, plan: Plan, { images, logs, unread }: Collected): Draft {
  const tables: DraftFile[] = [];
  const series = plan.series.flatMap((s) => seriesLines(s, plan, tables));
  const unplaced = [...plan.unplaced, ...unread];
  const lines = [
    "# Drafted from the names of files. What is marked FILL could not be told from them: write it in, after the colon.",
    "# Then run: coldseam check cooldown.yaml",
    `sample:  # FILL: the sample's name`,
    `cooldown: ${quoted(name)}  # the folder's name; no other cooldown in a database may have it`,
    ...pixelLines(images),
    "# tip: { resolution_nm: 30, resolution_sd_nm: 3 }  # full width at half maximum; without it only apparent widths",
    "# light: { photon_energy_meV: 100 }  # or wavenumber_per_cm, or wavelength_um",
    "# film: { thickness_nm: 30 }",
    ...channelLines(plan),
    ...logs.flatMap((log) => [
      `# ${said(log.written)} looks like a thermometer's log; take the marks away to have temperatures from it:`,
      `# thermometry: { log: ${quoted(log.written)}, time: ${quoted(log.time)}, temperature: ${quoted(log.temperature)}, unit: K }`,
    ]),
    "series:",
    ...series,
    ...(unplaced.length === 0 ? [] : ["", `# Not placed: ${countOf(unplaced.length, "file")}`]),
    ...(plan.unplaced.some((u) => u.why === NO_CHANNEL.why) ? [`# (${NO_CHANNEL.fix})`] : []),
    ...unplaced.map((u) => `#   ${said(u.written)}: ${said(u.why)}`),
  ];
  const text = `${lines.join("\n")}\n`;
  return {
    files: [{ name: "cooldown.yaml", text }, ...tables],
    series: plan.series.length,
    frames: plan.series.reduce((n, s) => n + framesIn(s), 0),
    toFill: lines.filter((l) => /^\s*(- )?[\w]+:.*# FILL/.test(l)).length,
    unplaced: unplaced.length,
  };
}

function framesIn(s: PlannedSeries): number {
  if (s.stacks !== null) return Object.values(s.stacks)[0]?.[0]?.pages ?? 0;
  return Math.max(0, ...s.tables.map((t) => t.rows.length));
}

function pixelLines(images: readonly FoundImage[]): string[] {
  const sized = images.filter((i): i is FoundImage & { pixel: PixelSize } => i.pixel !== null);
  const first = sized[0];
  if (first !== undefined && sized.every((i) => samePixel(i.pixel, first.pixel))) {
    const { xNm, yNm } = first.pixel;
    return ["scan:", `  pixel_size_nm: [${xNm}, ${yNm}]  # as ${said(first.written)} says of itself`];
  }
  const differ = first === undefined ? "" : "; the files say different ones";
  return [
    "scan:",
    `  pixel_size_nm:  # FILL: [10, 10] for 10 nm a column (fast axis) and 10 nm a row (slow axis)${differ}`,
  ];
}

function channelLines(plan: Plan): string[] {
  const used = new Set<ImageKey>();
  for (const s of plan.series) {
    for (const t of s.tables)
      for (const r of t.rows) for (const k of IMAGE_KEYS) if (r.files[k] !== undefined) used.add(k);
    for (const k of IMAGE_KEYS) if (s.stacks?.[k] !== undefined) used.add(k);
  }
  const lines: string[] = [];
  if (used.has("topography"))
    lines.push("  topography: { unit: nm }  # or um, m, or V with nm_per_unit: the names do not say");
  const [harmonic, other] = plan.harmonics;
  if (harmonic !== undefined && other === undefined) lines.push(`  amplitude: { harmonic: ${harmonic} }`);
  if (other !== undefined) lines.push("  amplitude:", `    harmonic:  # FILL: ${plan.harmonics.join(" or ")}`);
  if (used.has("phase")) lines.push("  phase: { unit: rad }  # or deg: the names do not say");
  return lines.length === 0 ? [] : ["channels:", ...lines];
}

function branchLine({ branch, word, stacks }: PlannedSeries): string {
  if (branch !== null)
    return `  - branch: ${branch}${word === null ? "" : `  # from "${said(word)}" in the names of its files`}`;
  const which = word === null ? "" : word === "" ? " those without such a word:" : ` those with "${said(word)}":`;
  const order = stacks === null ? "; the table goes from high to low: turn it round for warming" : "";
  return `  - branch:  # FILL:${which} cooling or warming; the names do not say${order}`;
}

function seriesLines(s: PlannedSeries, plan: Plan, tables: DraftFile[]): string[] {
  const branch = branchLine(s);
  const cycle = s.cycle === null ? [] : [`  # cycle ${s.cycle}, as the names say`];
  if (s.stacks === null) {
    const names = s.tables.map(({ harmonic, rows }) => {
      const several = plan.harmonics.length > 1 && harmonic !== null;
      const parts = [
        "frames",
        s.cycle === null ? "" : `cycle${s.cycle}`,
        s.branch ?? `branch${/^[a-z\d ]+$/.test(s.word ?? "") ? `_${s.word?.replaceAll(" ", "_")}` : ""}`,
        several ? `h${harmonic}` : "",
      ];
      const table = { name: `${unused(parts.filter((p) => p !== "").join("_"), tables)}.csv`, text: tableText(rows) };
      tables.push(table);
      return table.name;
    });
    const frames = names.length === 1 ? `    frames: ${names[0]}` : `    frames:  # FILL: ${names.join(" or ")}`;
    return [...cycle, branch, frames];
  }
  const lines = [...cycle, branch, "    stacks:"];
  let given: readonly number[] | null = null;
  let pages = 0;
  for (const key of IMAGE_KEYS) {
    const files = s.stacks[key];
    const first = files?.[0];
    if (files === undefined || first === undefined) continue;
    pages = first.pages;
    given ??= first.temperaturesK;
    const one = files.length === 1;
    lines.push(
      `      ${key}: ${one ? quoted(first.written) : ` # FILL: ${files.map((f) => quoted(f.written)).join(" or ")}`}`,
    );
  }
  lines.push(
    given === null
      ? `    temperatures_K:  # FILL: [ … ], ${countOf(pages, "temperature")} in K, one a page in the order of the pages`
      : `    # temperatures_K: from the axis of the file (${given[0]} to ${given.at(-1)} K)`,
  );
  return lines;
}

function unused(name: string, tables: readonly DraftFile[]): string {
  let out = name;
  for (let k = 2; tables.some((t) => t.name === `${out}.csv`); k++) out = `${name}_${k}`;
  return out;
}

function tableText(rows: readonly PlannedRow[]): string {
  const columns = IMAGE_KEYS.filter((k) => rows.some((r) => r.files[k] !== undefined));
  const cell = (s: string): string => (/[",\n\r]|^\s|\s$/.test(s) ? `"${s.replaceAll('"', '""')}"` : s);
  const lines = rows.map((r) => [String(r.temperatureK), ...columns.map((k) => cell(r.files[k] ?? ""))].join(","));
  return `${["temperature_K", ...columns].join(",")}\n${lines.join("\n")}\n`;
}
