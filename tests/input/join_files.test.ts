import { resolve } from "node:path";
import { afterEach, beforeEach, expect, test } from "vitest";
import { readCooldown, surveyCooldown } from "../../src/input/index.js";
import { CooldownFolder, problemsOf } from "./folder.js";

let folder: CooldownFolder;
beforeEach(() => {
  folder = new CooldownFolder();
});
afterEach(() => folder.remove());

const HEAD = "sample: KV-14\ncooldown: run3\nscan: { pixel_size_nm: [10, 12] }\n";

/** A YAML file with one stack a series: `cooling 180 170, warming 175`. Returns its path. */
function part(name: string, series: string, head = HEAD, more = "", size: [number, number] = [6, 5]): string {
  const lines = series.split(", ").map((words, k) => {
    const [branch, ...kelvin] = words.split(" ");
    const stack = `${name}-${k}.tif`;
    folder.stack(stack, kelvin.length, size[0], size[1], (p, i, j) => Number(kelvin[p]) + i + 0.1 * j);
    return `- { branch: ${branch}, stacks: { amplitude: ${stack.split("/").at(-1)} }, temperatures_K: [${kelvin.join(", ")}] }\n`;
  });
  return folder.text(`${name}.yaml`, `${head}${more}series:\n${lines.join("")}`);
}

const framesOf = (c: {
  frames: readonly { frame: number; series: number; cycle: number; temperatureK: number }[];
}): string => c.frames.map((f) => `${f.frame}:${f.series}:${f.cycle}:${f.temperatureK}`).join(" ");

test("two files are one cooldown, frames in the order given; a series goes on over the border of the files", async () => {
  const a = part("a", "cooling 180 170");
  const b = part("b", "cooling 160 150, warming 155 165");
  const c = part("sub/c", "warming 170 180, cooling 175");
  const joined = await readCooldown([a, b, c]);
  expect(framesOf(joined)).toBe(
    "0:0:1:180 1:0:1:170 2:0:1:160 3:0:1:150 4:1:1:155 5:1:1:165 6:1:1:170 7:1:1:180 8:2:2:175",
  );
  expect(joined.yamlFile).toBe(resolve(a));
  expect(joined.notices.map((n) => `${n.frame} ${n.code}: ${n.message}`)).toEqual([
    "2 series-continued: 160 K: the cooling series goes on in another file",
    "6 series-continued: 170 K: the warming series goes on in another file",
  ]);
  expect(joined.sources.map((s) => s.path)).toEqual([
    "a.yaml",
    "a-0.tif",
    "b.yaml",
    "b-0.tif",
    "b-1.tif",
    "sub/c.yaml",
    "sub/c-0.tif",
    "sub/c-1.tif",
  ]);
  // relative to the folder of the first, also where another lies beside that folder
  const turned = await readCooldown([c, a]);
  expect(turned.sources.map((s) => s.path)).toContain("../a-0.tif");
});

test("a cooling series that starts warmer than the one before it ended is a new one, in a new cycle", async () => {
  const joined = await readCooldown([part("a", "cooling 180 170"), part("b", "cooling 175 165")]);
  expect(framesOf(joined)).toBe("0:0:1:180 1:0:1:170 2:1:2:175 3:1:2:165");
  expect(joined.notices).toEqual([]);
});

test("what one file leaves out another may say; exclusions count in their own file", async () => {
  const a = part("a", "cooling 180 170", HEAD, "tip: { resolution_nm: 30 }\n");
  const more = "region: A\ntip: { resolution_nm: 30, resolution_sd_nm: 2 }\nfilm: { thickness_nm: 40 }\n";
  const b = part("b", "warming 175", HEAD, `${more}exclude: [{ frame: 0, reason: tip changed }]\n`);
  const joined = await readCooldown([a, b]);
  expect(joined).toMatchObject({
    region: "A",
    tip: { resolutionNm: 30, resolutionSdNm: 2 },
    filmThicknessNm: 40,
    photonEnergyMeV: null,
  });
  expect(joined.frames.map((f) => f.excluded)).toEqual([undefined, undefined, "tip changed"]);
});

test.each([
  [
    "sample",
    "sample: KV-15\ncooldown: run3\nscan: { pixel_size_nm: [10, 12] }\n",
    "",
    /b\.yaml:1:9: sample is "KV-15" here, "KV-14" at .*a\.yaml:1:9 \| mend the one/,
  ],
  [
    "name",
    "sample: KV-14\ncooldown: run4\nscan: { pixel_size_nm: [10, 12] }\n",
    "",
    /b\.yaml:2:11: cooldown is "run4" here, "run3" at .*a\.yaml:2:11 \| give the files of one cooldown one name/,
  ],
  [
    "pixel",
    "sample: KV-14\ncooldown: run3\nscan: { pixel_size_nm: [10, 10] }\n",
    "",
    /b\.yaml:3:24: scan\.pixel_size_nm is 10 × 10 nm here, 10 × 12 nm at .*a\.yaml:3:24/,
  ],
  ["tip", HEAD, "region: B\n", /b\.yaml:4:9: region is "B" here, "A" at .*a\.yaml:4:9/],
  [
    "region",
    HEAD,
    "region: A\ntip: { resolution_nm: 25 }\n",
    /b\.yaml:5:23: tip\.resolution_nm is 25 nm here, 30 nm at .*a\.yaml:5:23/,
  ],
  ["light", HEAD, "region: A\nlight: { wavelength_um: 10 }\n", /light is 123\.9842 meV here, 100 meV at/],
])("a contradiction shows both: %s", async (_, head, more, words) => {
  const a = part(
    "a",
    "cooling 180",
    HEAD,
    "region: A\ntip: { resolution_nm: 30 }\nlight: { photon_energy_meV: 100 }\n",
  );
  const found = await problemsOf(readCooldown([a, part("b", "warming 185", head, more)]));
  expect(found).toHaveLength(1);
  expect(found[0]).toMatch(words);
});

test("images of another size, and a file given twice", async () => {
  const a = part("a", "cooling 180");
  expect(await problemsOf(readCooldown([a, part("b", "warming 185", HEAD, "", [7, 5])]))).toEqual([
    expect.stringMatching(
      /b\.yaml:5:1: images of 5 × 7 pixels here, images of 5 × 6 pixels at .*a\.yaml:5:1 \| all images/,
    ),
  ]);
  expect(await problemsOf(readCooldown([a, a]))).toEqual([
    expect.stringMatching(/a\.yaml:1:1: the same file is given twice/),
  ]);
});

test("the problems of all files are said at once, and the sound frames of both are looked at", async () => {
  const a = part("a", "cooling 180 170", HEAD, "smple: 1\n");
  const b = part("b", "warming 185", HEAD, "film: 3\n");
  const survey = await surveyCooldown([a, b]);
  expect(survey.cooldown).toBeNull();
  expect(survey.problems.map((p) => p.at.replace(/.*\//, ""))).toEqual(["a.yaml:4:1", "b.yaml:4:7"]);
  expect(survey.frames.map((f) => f.temperatureK)).toEqual([180, 170, 185]);
  expect((await problemsOf(readCooldown([folder.text("x.yaml", "a: ["), folder.text("y.yaml", "b: [")]))).length).toBe(
    2,
  );
});
