import { readdirSync, readFileSync } from "node:fs";
import path from "node:path";
import { fileURLToPath } from "node:url";
import { gunzipSync, gzipSync } from "node:zlib";

/** What is spoilt: the description, a table of frames, a thermometer's log, or an image in one of its forms. */
export const KINDS = ["yaml", "table", "log", "tiff", "npy", "hdf5", "text"] as const;
export type Kind = (typeof KINDS)[number];

/** A sound cooldown in files, one of which is to be spoilt. */
export interface Seed {
  readonly name: string;
  readonly kind: Kind;
  readonly files: Readonly<Record<string, Uint8Array>>;
  /** Name of the file to spoil. */
  readonly spoil: string;
}

const FIXTURES = path.join(path.dirname(fileURLToPath(import.meta.url)), "../../fixtures");

const HEAD = `sample: KV-14
cooldown: kv14-run3
region: A
scan: { pixel_size_nm: [10, 12] }
tip: { resolution_nm: 30, resolution_sd_nm: 3 }
light:
  photon_energy_meV: 100
film: { thickness_nm: 30 }
channels:
  topography: { unit: V, nm_per_unit: 120 }
  amplitude: { unit: mV, harmonic: 3 }
  phase: { unit: deg }
`;
const LOG_ENTRY = `thermometry: { log: log.tsv, time: time, temperature: stage, unit: K, lag_s: 20, time_zone: "+02:00" }\n`;
const LOG = `# cryostat\ntime\tset\tstage\n${Array.from({ length: 40 }, (_, k) => `2024-05-17 09:${String(k).padStart(2, "0")}:00\t0\t${(180 - 0.5 * k).toFixed(3)}`).join("\n")}\n`;
const TABLE = `temperature_K,topography,amplitude,phase,started_at,ended_at,stage_x_nm,stage_y_nm
180,t.txt,a.txt,p.txt,2024-05-17T09:01:00+02:00,2024-05-17T09:05:00+02:00,0,0
,t.txt,"a.txt",p.txt,2024-05-17T09:10:00+02:00,2024-05-17T09:15:30+02:00,12.5,-3e1
`;
const EXCLUDE =
  "exclude:\n  - { frame: 0, region_nm: [0, 0, 50, 40], reason: a speck }\n  - { frame: 1, reason: tip changed }\n";

const ROWS = 20;
const COLS = 18;

/** A matrix as text, separated by `separator`. */
function matrix(separator: string, phase: number): string {
  const rows = Array.from({ length: ROWS }, (_, i) =>
    Array.from({ length: COLS }, (_, j) => {
      if ((7 * i + j) % 61 === 5) return "nan";
      return (
        1 +
        0.5 * Math.tanh((j - 8 + Math.sin(i / 3)) / 2) +
        0.01 * Math.sin(i * 12.9 + j * 78.2 + phase)
      ).toPrecision(6);
    }).join(separator),
  );
  return `# from the microscope\n${rows.join("\n")}\n`;
}

const bytes = (files: Readonly<Record<string, string>>): Record<string, Uint8Array> =>
  Object.fromEntries(Object.entries(files).map(([name, text]) => [name, Buffer.from(text, "utf8")]));

const IMAGES = bytes({ "t.txt": matrix(" ", 1), "a.txt": matrix(",", 2), "p.txt": matrix("\t", 3) });

/** Cooldowns around one image each: `amplitude` (or a complex `signal`) as `written`, pages `pages`. */
function around(
  name: string,
  kind: Kind,
  content: Uint8Array,
  key: "amplitude" | "signal",
  written: string,
  pages: number,
): Seed {
  const temperatures = Array.from({ length: pages }, (_, k) => 180 - 5 * k).join(", ");
  const yaml = `sample: S\ncooldown: c\nscan: { pixel_size_nm: [10, 10] }\nseries:\n- branch: cooling\n  stacks: { ${key}: ${JSON.stringify(written)} }\n  temperatures_K: [${temperatures}]\n`;
  return {
    name: `${kind} ${written}`,
    kind,
    files: { ...bytes({ "cooldown.yaml": yaml }), [name]: content },
    spoil: name,
  };
}

/** What `probe` must tell of an image: how it is written in a description, its pages, whether it is complex; null where it is no sound image. */
export type Probe = (
  file: string,
  dataset: string | null,
) => Promise<{ pages: number; complex: boolean; planes: number } | null>;

/** All seeds: the project's own fixtures of images, and descriptions, tables and logs written here. */
export async function makeSeeds(
  probe: Probe,
  list: (file: string) => Promise<readonly string[]>,
): Promise<readonly Seed[]> {
  const stacks = `${HEAD}series:\n  - branch: cooling\n    stacks:\n      topography: t.txt\n      amplitude: a.txt\n      phase: p.txt\n    temperatures_K: [180]\n  - branch: warming\n    stacks: { real: a.txt, imaginary: p.txt }\n    temperatures_K: [175.5]\n`;
  const table = `${HEAD}${LOG_ENTRY}series:\n- branch: cooling\n  frames: cooling.csv\n${EXCLUDE}`;
  const tabled = { ...IMAGES, ...bytes({ "cooldown.yaml": table, "cooling.csv": TABLE, "log.tsv": LOG }) };
  const timed = stacks
    .replace(
      "    temperatures_K: [180]\n",
      "    started_at: [2024-05-17T09:01:00]\n    ended_at: [2024-05-17T09:05:00]\n",
    )
    .replace("series:", `${LOG_ENTRY}series:`);
  const seeds: Seed[] = [
    {
      name: "yaml stacks",
      kind: "yaml",
      files: { ...IMAGES, ...bytes({ "cooldown.yaml": stacks }) },
      spoil: "cooldown.yaml",
    },
    { name: "yaml table", kind: "yaml", files: tabled, spoil: "cooldown.yaml" },
    {
      name: "yaml times",
      kind: "yaml",
      files: { ...IMAGES, ...bytes({ "cooldown.yaml": timed, "log.tsv": LOG }) },
      spoil: "cooldown.yaml",
    },
    { name: "table", kind: "table", files: tabled, spoil: "cooling.csv" },
    { name: "log", kind: "log", files: tabled, spoil: "log.tsv" },
  ];
  for (const [name, content] of Object.entries(IMAGES)) seeds.push(around(name, "text", content, "amplitude", name, 1));
  seeds.push(around("a.csv.gz", "text", gzipSync(Buffer.from(matrix(";", 4))), "amplitude", "a.csv.gz", 1));
  for (const folder of ["images", "files"]) {
    for (const name of readdirSync(path.join(FIXTURES, folder)).sort()) {
      const file = path.join(FIXTURES, folder, name);
      if (/\.(tif|npy)$/.test(name)) {
        const found = await probe(file, null);
        if (found === null) continue;
        const written = found.planes > 1 && !found.complex ? `${name}#:${found.planes - 1}` : name;
        const kind = name.endsWith(".npy") ? "npy" : "tiff";
        seeds.push(
          around(name, kind, readFileSync(file), found.complex ? "signal" : "amplitude", written, found.pages),
        );
      } else if (/\.(h5|nxs)$/.test(name)) {
        for (const dataset of await list(file)) {
          const found = await probe(file, dataset);
          if (found === null) continue;
          const key = found.complex ? "signal" : "amplitude";
          seeds.push(around(name, "hdf5", readFileSync(file), key, `${name}:${dataset}`, found.pages));
        }
      }
    }
  }
  const bomb = gunzipSync(readFileSync(path.join(FIXTURES, "files/bomb.h5.gz")));
  seeds.push(around("bomb.h5", "hdf5", bomb, "amplitude", "bomb.h5:/bomb", 1));
  return seeds;
}
