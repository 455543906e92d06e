import { dirname, relative, resolve, sep } from "node:path";
import type { Cooldown, FrameInfo, Notice, SourceFile, Tip } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import { plainText } from "../model/text.js";
import { cycleNumbers } from "./cycles.js";
import type { FileSurvey, Survey } from "./survey_file.js";
import type { Step } from "./yaml_document.js";

/**
 * Several YAML files that describe parts of one cooldown, as one: their frames in the order in which the files are given, numbered on; what
 * one file leaves out, another may say; contradictions are problems that show both. A series with which a file begins goes on with the
 * one with which the file before it ends where branch and temperature do: a cooling series kept in two files is one series.
 * @param files at least one
 */
export function joinFiles(files: readonly FileSurvey[]): Survey {
  const [first, ...others] = files as readonly [FileSurvey, ...FileSurvey[]];
  if (others.length === 0) return first;
  const problems = [...files.flatMap((f) => f.problems), ...contradictions(files), ...givenTwice(files)];
  const { frames, continued } = joinFrames(files);
  const notices = [...joinNotices(files), ...continued];
  const pixel = files.find((f) => f.pixel !== null)?.pixel ?? null;
  const cooldowns = files.flatMap((f) => (f.cooldown === null ? [] : [f.cooldown]));
  const waiting = files.flatMap((f) => f.waiting);
  const survey = { problems, frames, pixel, notices, waiting, named: files.flatMap((f) => f.named) };
  if (problems.length > 0 || cooldowns.length < files.length) return { ...survey, cooldown: null };
  const said = <K extends keyof Cooldown>(key: K): Cooldown[K] =>
    (cooldowns.find((c) => c[key] !== null && c[key] !== "" && c[key] !== undefined) ?? cooldowns[0])[key];
  const cooldown: Cooldown = {
    ...cooldowns[0],
    region: said("region"),
    tip: joinTips(cooldowns),
    photonEnergyMeV: said("photonEnergyMeV"),
    filmThicknessNm: said("filmThicknessNm"),
    amplitudeUnit: said("amplitudeUnit"),
    amplitudeHarmonic: said("amplitudeHarmonic") ?? null,
    frames,
    sources: joinSources(cooldowns),
    notices,
  };
  return { ...survey, cooldown };
}

function joinTips(cooldowns: readonly Cooldown[]): Tip | null {
  const tips = cooldowns.flatMap((c) => (c.tip === null ? [] : [c.tip]));
  // A file without a standard deviation has 0 here.
  return tips.find((t) => t.resolutionSdNm > 0) ?? tips[0] ?? null;
}

interface Said {
  readonly path: readonly Step[];
  /** In words; null where the file does not say it. */
  readonly words: (f: FileSurvey) => string | null;
  readonly fix: string;
}

const MEND = "mend the one that is wrong, or give the files apart under names of their own";
const number = (v: number | null | undefined, unit: string): string | null =>
  v === null || v === undefined ? null : `${Number(v.toPrecision(7))} ${unit}`;

/** What must be the same in all files that say it. */
const SAID: readonly Said[] = [
  {
    path: ["cooldown"],
    words: (f) => quoted(f.cooldown?.cooldown),
    fix: "give the files of one cooldown one name, or ingest different cooldowns one at a time",
  },
  { path: ["sample"], words: (f) => quoted(f.cooldown?.sample), fix: MEND },
  { path: ["region"], words: (f) => quoted(f.cooldown?.region), fix: MEND },
  {
    path: ["scan", "pixel_size_nm"],
    words: ({ pixel: p }) => (p === null ? null : `${number(p.xNm, "×")} ${number(p.yNm, "nm")}`),
    fix: MEND,
  },
  { path: ["tip", "resolution_nm"], words: (f) => number(f.cooldown?.tip?.resolutionNm, "nm"), fix: MEND },
  { path: ["tip", "resolution_sd_nm"], words: (f) => number(f.cooldown?.tip?.resolutionSdNm || null, "nm"), fix: MEND },
  { path: ["light"], words: (f) => number(f.cooldown?.photonEnergyMeV, "meV"), fix: MEND },
  { path: ["film", "thickness_nm"], words: (f) => number(f.cooldown?.filmThicknessNm, "nm"), fix: MEND },
  { path: ["channels", "amplitude", "unit"], words: (f) => quoted(f.cooldown?.amplitudeUnit), fix: MEND },
  { path: ["channels", "amplitude", "harmonic"], words: (f) => number(f.cooldown?.amplitudeHarmonic, ""), fix: MEND },
  {
    path: ["series"],
    words: ({ frames: [f] }) => (f === undefined ? null : `images of ${f.cols} × ${f.rows} pixels`),
    fix: "all images of a cooldown need one size (columns × rows): crop them alike, or ingest the files apart",
  },
];

function quoted(s: string | null | undefined): string | null {
  return s === null || s === undefined || s === "" ? null : `"${plainText(s)}"`;
}

function contradictions(files: readonly FileSurvey[]): Problem[] {
  return SAID.flatMap(({ path, words, fix }) => {
    const first = files.find((f) => words(f) !== null);
    return files.flatMap((f): Problem[] => {
      const [here, there] = [words(f), first === undefined ? null : words(first)];
      if (here === null || here === there || first === undefined) return [];
      const name = path[0] === "series" ? "" : `${path.join(".")} is `;
      return [
        { at: f.doc.at(path), problem: `${name}${here.trim()} here, ${there?.trim()} at ${first.doc.at(path)}`, fix },
      ];
    });
  });
}

function givenTwice(files: readonly FileSurvey[]): Problem[] {
  const seen = new Set<string>();
  return files.flatMap((f): Problem[] => {
    const path = f.cooldown === null ? null : resolve(f.cooldown.yamlFile);
    if (path === null || !seen.has(path)) {
      if (path !== null) seen.add(path);
      return [];
    }
    return [{ at: f.doc.at([]), problem: "the same file is given twice", fix: "give it once" }];
  });
}

/** Where a file begins with the branch in which the one before it ended, going on from its last temperature. */
function goesOn(last: FrameInfo | undefined, next: FrameInfo | undefined): boolean {
  if (last === undefined || next === undefined || last.branch !== next.branch) return false;
  return next.branch === "cooling" ? next.temperatureK <= last.temperatureK : next.temperatureK >= last.temperatureK;
}

function joinFrames(files: readonly FileSurvey[]): { frames: FrameInfo[]; continued: Notice[] } {
  const frames: FrameInfo[] = [];
  const continued: Notice[] = [];
  let nextSeries = 0;
  for (const f of files) {
    const [last, first] = [frames.at(-1), f.frames[0]];
    const on = goesOn(last, first);
    if (on && first !== undefined) {
      const message = `${first.temperatureK} K: the ${first.branch} series goes on in another file`;
      continued.push({ frame: frames.length, code: "series-continued", message });
    }
    const offset = on && first !== undefined ? nextSeries - 1 - first.series : nextSeries;
    const from = frames.length;
    for (const info of f.frames) frames.push({ ...info, frame: from + info.frame, series: offset + info.series });
    nextSeries = Math.max(nextSeries, ...f.frames.map((info) => offset + info.series + 1));
  }
  const bySeries = new Map<number, FrameInfo[]>();
  for (const f of frames) bySeries.set(f.series, [...(bySeries.get(f.series) ?? []), f]);
  const runs = [...bySeries.values()];
  const cycles = cycleNumbers(
    runs.map((run) => ({
      branch: run[0].branch,
      firstK: run[0].temperatureK,
      lastK: run[run.length - 1].temperatureK,
    })),
  );
  const cycleOf = new Map([...bySeries.keys()].map((series, k) => [series, cycles[k]]));
  return { frames: frames.map((f) => ({ ...f, cycle: cycleOf.get(f.series) ?? f.cycle })), continued };
}

function joinNotices(files: readonly FileSurvey[]): Notice[] {
  let from = 0;
  return files.flatMap((f) => {
    const shifted = f.notices.map((n) => ({ ...n, frame: n.frame === null ? null : n.frame + from }));
    from += f.frames.length;
    return shifted;
  });
}

/** Each file once, relative to the folder of the first YAML file. */
function joinSources(cooldowns: readonly Cooldown[]): SourceFile[] {
  const folder = dirname(cooldowns[0].yamlFile);
  const out = new Map<string, SourceFile>();
  for (const c of cooldowns) {
    for (const s of c.sources) {
      const path = resolve(dirname(c.yamlFile), s.path);
      if (!out.has(path)) out.set(path, { ...s, path: relative(folder, path).split(sep).join("/") });
    }
  }
  return [...out.values()];
}
