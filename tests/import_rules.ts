import { posix } from "node:path";

/** Which top folder (or file) of `src/` may import which. Its own files are always allowed, but no stage another stage's. */
export const MAY_IMPORT: Readonly<Record<string, readonly string[]>> = {
  model: [],
  numerics: [],
  raster: ["model", "numerics"],
  input: ["model", "raster"],
  stages: ["model", "numerics", "raster"],
  "settings.ts": ["model", "stages"],
  workers: ["model", "numerics", "raster", "input", "stages", "settings.ts"],
  "analyse.ts": ["model", "numerics", "stages", "settings.ts", "workers"],
  tables: ["model"],
  store: ["model", "tables"],
  figures: ["model", "numerics", "tables"],
  report: ["model", "numerics", "tables", "figures"],
  demo: ["model", "numerics", "raster", "input"],
  study: ["model", "numerics", "input", "settings.ts", "analyse.ts", "stages", "workers", "tables", "store", "demo"],
  cli: ["model", "numerics", "raster", "input", "stages", "settings.ts", "workers", "analyse.ts"].concat([
    "tables",
    "store",
    "figures",
    "report",
    "demo",
    "study",
  ]),
};

/** Packages that live behind one folder. */
const ONLY_IN: Readonly<Record<string, string>> = {
  "better-sqlite3": "store",
  commander: "cli",
  "opencv-wasm": "raster",
};

/** Folders of pure values: no files, processes or threads, so nothing of Node's own. */
const WITHOUT_NODE: readonly string[] = ["model", "numerics", "stages", "tables", "figures"];

/** The browser's side of the report: nothing but its own bundle imports from it, and it has no Node. What both sides share lies beside it. */
const PAGE = "report/page/";

/** Every breach of the rules as a line of text. `files`: path below `src/` with forward slashes → TypeScript text. */
export function breaches(files: ReadonlyMap<string, string>): string[] {
  const found: string[] = [];
  for (const [file, text] of files) {
    const top = file.split("/")[0];
    const allowed = MAY_IMPORT[top];
    if (!allowed) {
      found.push(`${file}: ${top} is not in the table of folders`);
      continue;
    }
    for (const specifier of importsOf(text)) {
      const problem = specifier.startsWith(".")
        ? ownBreach(files, file, top, allowed, specifier)
        : outsideBreach(file.startsWith(PAGE) ? PAGE : top, specifier);
      if (problem) found.push(`${file}: ${specifier}: ${problem}`);
    }
  }
  return found;
}

function ownBreach(
  files: ReadonlyMap<string, string>,
  file: string,
  top: string,
  allowed: readonly string[],
  specifier: string,
): string | null {
  const target = posix.join(posix.dirname(file), specifier).replace(/\.js$/, ".ts");
  if (target.startsWith("../")) return "leads out of src";
  if (!files.has(target)) return "there is no such file";
  if (target.startsWith(PAGE) && !file.startsWith(PAGE))
    return "only the page itself may import what runs in the browser";
  const [folder, stage, inside] = target.split("/");
  if (folder !== top) {
    if (!allowed.includes(folder)) return `${top} may not import ${folder}`;
    if (folder !== "stages") return null;
    const door = top === "settings.ts" ? "settings.ts" : "index.ts";
    return inside === door ? null : `only stages/${stage}/${door} may be imported from outside the stage`;
  }
  if (top === "stages" && stage !== file.split("/")[1]) return "a stage may not import another stage";
  return null;
}

function outsideBreach(top: string, specifier: string): string | null {
  if (specifier.startsWith("node:")) {
    return WITHOUT_NODE.includes(top) || top === PAGE ? `${top} may not use Node's own modules` : null;
  }
  const name = specifier
    .split("/")
    .slice(0, specifier.startsWith("@") ? 2 : 1)
    .join("/");
  const home = ONLY_IN[name];
  return home && home !== top ? `${name} belongs in ${home}` : null;
}

/** Module specifiers of a TypeScript text: static, for side effects only, re-exported, dynamic, types and require. */
export function importsOf(text: string): string[] {
  const code = text.replace(/\/\*[\s\S]*?\*\//g, "").replace(/^\s*\/\/.*$/gm, "");
  const pattern =
    /\b(?:from\s*|import\s*|import\s*\(\s*|require\s*\(\s*|createRequire\([^)]*\)\s*\(\s*)(["'])([^"'\n]+)\1/g;
  return Array.from(code.matchAll(pattern), (m) => m[2]);
}
