import type { Branch } from "../model/cooldown.js";
import type { ImageKey } from "./schema.js";

/** What the parts of a file's name say; null where they say nothing, or two things at once. */
export interface NameParts {
  readonly image: ImageKey | null;
  readonly branch: Branch | null;
  /** The word of a direction (`down`) that the branch was taken from; null where a clearer word says it. */
  readonly direction: string | null;
  readonly temperatureK: number | null;
  /** As written: `T165p5`, `-93C`. */
  readonly temperatureText: string | null;
  readonly harmonic: number | null;
  readonly cycle: number | null;
  /** What is left: sample, date, running number; lower case, in order. */
  readonly rest: readonly string[];
  /** Things said twice with different meanings. */
  readonly doubts: readonly string[];
}

const IMAGES: Readonly<Record<string, ImageKey>> = {
  topography: "topography", topo: "topography", height: "topography",
  amplitude: "amplitude", amp: "amplitude", ampl: "amplitude", magnitude: "amplitude", abs: "amplitude",
  phase: "phase", pha: "phase", phi: "phase", arg: "phase",
  signal: "signal", complex: "signal", cplx: "signal",
  real: "real", re: "real",
  imaginary: "imaginary", imag: "imaginary", im: "imaginary",
}; // prettier-ignore
const BRANCHES: Readonly<Record<string, Branch>> = {
  cooling: "cooling", cool: "cooling", cooled: "cooling",
  warming: "warming", warm: "warming", warmed: "warming", warmup: "warming",
  heating: "warming", heat: "warming", heated: "warming", heatup: "warming",
}; // prettier-ignore
/** Which way something goes: the temperature where no clearer word stands beside them, else perhaps the slow axis of the scan. */
const DIRECTIONS: Readonly<Record<string, Branch>> = {
  down: "cooling", dn: "cooling", dwn: "cooling", downward: "cooling", downwards: "cooling",
  falling: "cooling", fall: "cooling", decreasing: "cooling", decrease: "cooling",
  up: "warming", upward: "warming", upwards: "warming",
  rising: "warming", rise: "warming", increasing: "warming", increase: "warming",
}; // prettier-ignore
/** Words that are nothing without the number after them. */
const NUMBERED = new Set(["run", "sweep", "ramp", "pass", "leg", "part", "series", "branch"]);
const RETRACE = new Set(["retrace", "backward", "backwards", "bwd"]);
const TRACE = new Set(["trace", "forward", "forwards", "fwd"]);

/**
 * Reads a file's name by its parts, whatever their order: words of a channel (`amp`, `phase`, …, with `retrace`), of a branch (`cooling`,
 * `heat`, …; `down`, `up`, … where there is no such word), a temperature with its unit or a T before it (`165.5K`, `165p5 K`, `T165`, `-93C`), a harmonic (`h3`, `harmonic3`), a cycle
 * (`cycle2`). Single letters and bare numbers say nothing. `words` are taken without regard to case.
 * @param path relative path without folders above the one that is described; folders' names count too
 */
export function nameParts(path: string): NameParts {
  const doubts: string[] = [];
  const found = { image: new Set<ImageKey>(), branch: new Set<Branch>(), kelvin: new Map<number, string>() };
  const numbers = { harmonic: new Set<number>(), cycle: new Set<number>() };
  const directions = new Map<Branch, string>();
  let retrace = false;
  let text = path.replace(/(\.(ome|tiff?|npy|h5|hdf5?|nxs|csv|tsv|txt|dat|asc|gz))+$/i, "");
  text = takeTemperatures(text, found.kelvin, doubts);
  text = take(text, /(?:harmonic|harm|demod|h)[ _=-]?(\d{1,2})/gi, (n) => numbers.harmonic.add(Number(n)));
  text = take(text, /(\d)(?:st|nd|rd|th)[ _-]?(?:harmonic|harm)/gi, (n) => numbers.harmonic.add(Number(n)));
  text = take(text, /(?:cycle|loop)[ _=-]?(\d{1,3})/gi, (n) => numbers.cycle.add(Number(n)));
  const rest: string[] = [];
  for (const word of wordsOf(text)) {
    const image = IMAGES[word];
    const branch = BRANCHES[word];
    if (image !== undefined) found.image.add(image);
    else if (branch !== undefined) found.branch.add(branch);
    else if (DIRECTIONS[word] !== undefined) directions.set(DIRECTIONS[word], word);
    else if (RETRACE.has(word)) retrace = true;
    else if (!TRACE.has(word)) rest.push(word);
  }
  const one = <T>(set: ReadonlySet<T>, what: string): T | null => {
    if (set.size > 1) doubts.push(`${what}: ${[...set].map(String).join(" and ")}`);
    return set.size === 1 ? ([...set][0] ?? null) : null;
  };
  const plain = one(found.image, "channel");
  const clear = found.branch.size > 0;
  const branch = one(clear ? found.branch : new Set(directions.keys()), "branch");
  const temperatureK = one(new Set(found.kelvin.keys()), "temperature in K");
  return {
    image: plain !== null && retrace ? retraceOf(plain) : plain,
    branch,
    direction: clear || branch === null ? null : (directions.get(branch) ?? null),
    temperatureK,
    temperatureText: temperatureK === null ? null : (found.kelvin.get(temperatureK) ?? null),
    harmonic: one(numbers.harmonic, "harmonic"),
    cycle: one(numbers.cycle, "cycle"),
    rest,
    doubts,
  };
}

function retraceOf(image: ImageKey): ImageKey | null {
  if (image === "topography" || image === "amplitude" || image === "phase") return `${image}_retrace`;
  return null;
}

/** A temperature stands with its unit behind it or a T before it, free of other letters. The decimal sign may be a point, a `p` or a comma. */
const NUMBER = "(-?\\d{1,4}(?:[.,p]\\d{1,3})?)";
const BEFORE = "(?<![\\d.,A-Za-z])(?:[Tt](?:emp(?:erature)?)?[ _=-]?)?";
const TEMPERATURES: readonly { readonly pattern: RegExp; readonly celsius: boolean }[] = [
  { pattern: new RegExp(`${BEFORE}${NUMBER}[ _]?(?:K|[Kk]elvin)(?![A-Za-z])`, "g"), celsius: false },
  { pattern: new RegExp(`${BEFORE}${NUMBER}[ _]?(?:deg[ _]?C|[Cc]elsius|°C|C)(?![A-Za-z])`, "g"), celsius: true },
  {
    pattern: new RegExp(`(?<![A-Za-z])(?:T|temp|temperature)[ _=-]?${NUMBER}(?![\\d.,]*[A-Za-z\\d])`, "gi"),
    celsius: false,
  },
];

function takeTemperatures(text: string, found: Map<number, string>, doubts: string[]): string {
  let out = text;
  for (const { pattern, celsius } of TEMPERATURES) {
    out = out.replace(pattern, (whole: string, written: string, at: number, all: string) => {
      const dash = /[A-Za-z\d=-]-?$/.test(all.slice(0, at)) && all[at - 1] === "-";
      if (celsius && (dash || /[Tt]\w*-$/.test(whole.slice(0, whole.indexOf(written))))) {
        // Before degrees Celsius a dash may be a sign.
        doubts.push(`temperature: ${whole.trim()} above or below zero`);
        return "_";
      }
      const value = Number((celsius ? written : written.replace(/^-/, "")).replace(/[p,]/, "."));
      const kelvin = celsius ? Number((value + 273.15).toFixed(3)) : value;
      if (kelvin > 0 && kelvin <= 1000 && !found.has(kelvin)) found.set(kelvin, whole.trim());
      return "_";
    });
  }
  return out;
}

function take(text: string, pattern: RegExp, f: (number: string) => void): string {
  const whole = new RegExp(`(?<![A-Za-z0-9])${pattern.source}(?![A-Za-z0-9])`, pattern.flags);
  return text.replace(whole, (_, n: string) => {
    f(n);
    return "_";
  });
}

/** Parts between signs, at the border of letters and digits, and where a capital follows a small letter; lower case. */
export function wordsOf(text: string): string[] {
  return text
    .replace(/([a-z])([A-Z])/g, "$1 $2")
    .replace(/([A-Za-z])(\d)/g, "$1 $2")
    .replace(/(\d)([A-Za-z])/g, "$1 $2")
    .toLowerCase()
    .split(/[^\p{L}\d]+/u)
    .filter((w) => w !== "");
}

/** The words of a name that may stand for a branch: those of letters, and numbers behind a word as `run`. */
export function tellingWords(rest: readonly string[]): string[] {
  return rest.flatMap((word, k) => {
    if (/^\d/.test(word)) return [];
    const next = rest[k + 1] ?? "";
    return [NUMBERED.has(word) && /^\d+$/.test(next) ? `${word} ${Number(next)}` : word];
  });
}

/** The words by which names are read, for a message. */
export const KNOWN_WORDS = {
  channels: Object.keys(IMAGES).filter((w) => w.length > 2),
  branches: [...Object.keys(BRANCHES), ...Object.keys(DIRECTIONS)],
};
