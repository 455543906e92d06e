import { readFileSync, readdirSync } from "node:fs";
import { join, sep } from "node:path";
import { describe, expect, it } from "vitest";
import { MAY_IMPORT, breaches, importsOf } from "./import_rules.js";

function sources(): Map<string, string> {
  const found = new Map<string, string>();
  for (const path of readdirSync("src", { recursive: true, encoding: "utf8" })) {
    if (path.endsWith(".ts")) found.set(path.split(sep).join("/"), readFileSync(join("src", path), "utf8"));
  }
  return found;
}

describe("import directions", () => {
  const files = sources();

  it("hold in the whole tree", () => {
    expect(files.size).toBeGreaterThan(100);
    expect(breaches(files)).toEqual([]);
  });

  it("are read from real imports: those that must exist are seen", () => {
    const all = [...files.values()].flatMap(importsOf);
    for (const known of ["better-sqlite3", "commander", "opencv-wasm", "ndarray", "node:fs"]) {
      expect(all).toContain(known);
    }
    expect(importsOf(files.get("analyse.ts") ?? "").filter((s) => s.startsWith("./stages/")).length).toBeGreaterThan(3);
    // Dynamic ones too: the commands are loaded on demand.
    expect(importsOf(files.get("cli/main.ts") ?? "")).toContain("./ingest.js");
  });

  it.each([
    ["model/raster.ts", `import { erf } from "../numerics/erf.js";`, "model may not import numerics"],
    ["numerics/kink.ts", `import type { Raster } from "../model/raster.js";`, "numerics may not import model"],
    ["raster/opencv.ts", `import { check } from "../input/index.js";`, "raster may not import input"],
    ["input/index.ts", `import { erf } from "../numerics/erf.js";`, "input may not import numerics"],
    ["stages/walls/index.ts", `export { x } from "../states/index.js";`, "a stage may not import another stage"],
    ["stages/walls/index.ts", `import { load } from "../../input/index.js";`, "stages may not import input"],
    ["stages/walls/index.ts", `import { settings } from "../../settings.js";`, "stages may not import settings.ts"],
    ["stages/walls/index.ts", `import { readFileSync } from "node:fs";`, "stages may not use Node's own modules"],
    ["stages/walls/index.ts", `const cv = await import("opencv-wasm");`, "opencv-wasm belongs in raster"],
    ["model/raster.ts", `createRequire(import.meta.url)("opencv-wasm");`, "opencv-wasm belongs in raster"],
    ["analyse.ts", `import { open } from "./store/open.js";`, "analyse.ts may not import store"],
    ["analyse.ts", `import { inner } from "./stages/walls/inner.js";`, "only stages/walls/index.ts may be imported"],
    [
      "workers/tasks.ts",
      `import { s } from "../stages/walls/settings.js";`,
      "only stages/walls/index.ts may be imported",
    ],
    ["settings.ts", `import { fit } from "./stages/walls/index.js";`, "only stages/walls/settings.ts may be imported"],
    ["store/open.ts", `import { erf } from "../numerics/erf.js";`, "store may not import numerics"],
    ["tables/format.ts", `import { open } from "../store/open.js";`, "tables may not import store"],
    ["tables/format.ts", `import Database from "better-sqlite3";`, "better-sqlite3 belongs in store"],
    ["store/open.ts", `import { Command } from "commander";`, "commander belongs in cli"],
    ["report/pack.ts", `import { open } from "../store/open.js";`, "report may not import store"],
    ["report/pack.ts", `import { start } from "./page/main.js";`, "only the page itself may import"],
    ["report/page/main.ts", `import { readFileSync } from "node:fs";`, "may not use Node's own modules"],
    ["demo/index.ts", `import { analyse } from "../analyse.js";`, "demo may not import analyse.ts"],
    ["cli/main.ts", `import { x } from "../nowhere.js";`, "there is no such file"],
    ["cli/main.ts", `import { x } from "../../tests/import_rules.js";`, "leads out of src"],
    ["helpers/text.ts", ``, "helpers is not in the table"],
  ])("a breach is found: %s: %s", (file, line, message) => {
    // A small tree that is in order, and the one line.
    const tree = new Map(
      ["model/raster.ts", "numerics/erf.ts", "numerics/kink.ts", "input/index.ts", "settings.ts", "analyse.ts"]
        .concat([
          "stages/walls/index.ts",
          "stages/walls/inner.ts",
          "stages/walls/settings.ts",
          "stages/states/index.ts",
        ])
        .concat(["store/open.ts", "cli/main.ts", "raster/opencv.ts", "report/pack.ts", "report/page/main.ts"])
        .map((path) => [path, ""]),
    );
    expect(breaches(tree)).toEqual([]);
    tree.set(file, line);
    expect(breaches(tree)).toEqual([expect.stringContaining(message)]);
  });

  it("what is allowed is not called a breach", () => {
    const tree = new Map([
      ["model/raster.ts", `import ndarray from "ndarray";`],
      ["numerics/erf.ts", `import { mersenne } from "pure-rand/generator/mersenne";\nimport { x } from "./kink.js";`],
      ["numerics/kink.ts", `// import { a } from "../model/raster.js";\n/* import("../cli/main.js") */`],
      ["stages/walls/index.ts", `import { erf } from "../../numerics/erf.js";\nimport "./inner.js";`],
      ["stages/walls/inner.ts", `import type { Raster } from "../../model/raster.js";`],
      ["store/open.ts", `import Database from "better-sqlite3";\nimport { readFileSync } from "node:fs";`],
      ["cli/main.ts", `import { Command } from "commander";\nawait import("../store/open.js");`],
    ]);
    expect(breaches(tree)).toEqual([]);
  });

  it("the table has no circle: what a folder imports never leads back to it", () => {
    const reaches = (from: string, seen: Set<string>): Set<string> => {
      for (const next of MAY_IMPORT[from] ?? []) if (!seen.has(next)) reaches(next, seen.add(next));
      return seen;
    };
    for (const folder of Object.keys(MAY_IMPORT)) expect(reaches(folder, new Set())).not.toContain(folder);
  });
});
