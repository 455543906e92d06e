import { copyFileSync, readFileSync, readdirSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import * as fc from "fast-check";
import { afterEach, beforeEach, describe, expect, test } from "vitest";
import { draft } from "../../src/cli/draft.js";
import { draftCooldown, readCooldown } from "../../src/input/index.js";
import { nameParts } from "../../src/input/file_names.js";
import { CooldownFolder, problemsOf } from "../input/folder.js";
import { coldseam } from "./program.js";

const FILES = join(import.meta.dirname, "../../fixtures/files");

describe("what a name says", () => {
  test.each([
    ["KV14_cooling_165K_amp.tif", "amplitude cooling 165 kv,14"],
    ["phase 165p5 K warming.tif", "phase warming 165.5 "],
    ["cool/T165.5_topo_0012.tif", "topography cooling 165.5 0012"],
    ["Heating-T=170-Amplitude-Retrace.npy", "amplitude_retrace warming 170 "],
    ["warmUp_180_K_heightFwd.tif", "topography warming 180 "],
    ["KV14 #7 (film) down AMP 148,5 K.tiff", "amplitude cooling 148.5 kv,14,7,film"],
    ["dn/165K_amp.tif", "amplitude cooling 165 "],
    ["rising_165K_amp.tif", "amplitude warming 165 "],
    ["cooling_165K_amp_up.tif", "amplitude cooling 165 "], // the slow axis upwards
    ["heatup_165K_amp.tif", "amplitude warming 165 "],
    ["film_-93C_amp.tif", "amplitude null 180.15 film"],
    ["re_20degC.csv.gz", "real null 293.15 "],
    ["run.h5:/cooling/amplitude", "amplitude cooling null run"],
    ["180_amp.tif", "amplitude null null 180"], // a bare number says nothing
    ["scan_512k_amp.tif", "amplitude null null scan,512,k"],
    ["T180nm_amp.tif", "amplitude null null t,180,nm"],
    ["a_p_z.tif", "null null null a,p,z"], // nor do single letters
    ["cooldown3_165K.tif", "null null 165 cooldown,3"],
  ])("%s", (name, words) => {
    const p = nameParts(name);
    expect(`${p.image} ${p.branch} ${p.temperatureK} ${p.rest.join()}`).toBe(words);
    expect(p.doubts).toEqual([]);
  });

  test.each([
    ["amp_phase_165K.tif", "channel: amplitude and phase"],
    ["cooling_after_warming_165K_amp.tif", "branch: cooling and warming"],
    ["up_and_down_165K_amp.tif", "branch: warming and cooling"],
    ["165K_170K_amp.tif", "temperature in K: 165 and 170"],
    ["film-93C_amp.tif", "temperature: 93C above or below zero"],
  ])("%s says two things", (name, doubt) => {
    expect(nameParts(name).doubts).toEqual([doubt]);
  });

  test("the parts in any order, with any sign between them, say the same", () => {
    const temperature = fc
      .integer({ min: 20, max: 3500 })
      .chain((tenths) =>
        fc
          .constantFrom(`${tenths / 10}K`, `T${tenths / 10}`, `${(tenths / 10).toFixed(1).replace(".", "p")}K`)
          .map((text) => ({ text, kelvin: tenths / 10 })),
      );
    fc.assert(
      fc.property(
        temperature,
        fc.constantFrom(["amp", "amplitude"], ["Phase", "phase"], ["topo", "topography"], ["HEIGHT", "topography"]),
        fc.constantFrom(["cooling", "cooling"], ["Cool", "cooling"], ["warming", "warming"], ["heat", "warming"]),
        fc.constantFrom("_", " ", "__", "+"),
        fc.shuffledSubarray([0, 1, 2, 3], { minLength: 4 }),
        (t, [image, channel], [branch, direction], separator, order) => {
          const parts = [t.text, image, branch, "KV14x2"];
          const p = nameParts(`${order.map((k) => parts[k]).join(separator)}.tif`);
          expect([p.temperatureK, p.image, p.branch, p.doubts]).toEqual([t.kelvin, channel, direction, []]);
        },
      ),
      { seed: 9, numRuns: 300 },
    );
  });
});

let folder: CooldownFolder;
beforeEach(() => {
  folder = new CooldownFolder();
});
afterEach(() => folder.remove());
const text = (name: string): string => readFileSync(join(folder.path, name), "utf8");

test("from a folder of oddly named files to a cooldown that is read, by what the program prints", async () => {
  for (const t of [180, 170, 160]) {
    folder.stack(`down/kv14 ${t}K cooling phase.tif`, 1);
    folder.stack(`down/kv14 ${t}K cooling AMP.tif`, 1);
  }
  folder.stack("T165p5_warm_amp.tif", 1);
  folder.stack("amp_T158_warm.tif", 1);
  folder.stack("overview.tif", 1);
  folder.text("notes.txt", "nice film\n");
  folder.text("log.csv", "time,T sample (K)\n2024-05-17T09:00:00Z,180\n");
  const made = coldseam("draft", folder.path);
  expect(made).toMatchObject({ code: 0, err: "" });
  const yaml = join(folder.path, "cooldown.yaml");
  expect(made.out).toBe(
    `wrote ${yaml}\nwrote ${join(folder.path, "frames_cooling.csv")}\nwrote ${join(folder.path, "frames_warming.csv")}\n` +
      `5 frames in 2 series\nnot placed: 2 files, listed with the reason at the end of ${yaml}\n` +
      `to fill in: 2 places marked FILL in ${yaml}\nnext: edit ${yaml}, then coldseam check ${yaml}\n`,
  );
  expect(text("frames_cooling.csv")).toBe(
    "temperature_K,amplitude,phase\n" +
      [180, 170, 160].map((t) => `${t},down/kv14 ${t}K cooling AMP.tif,down/kv14 ${t}K cooling phase.tif\n`).join(""),
  );
  expect(text("frames_warming.csv")).toBe(
    "temperature_K,amplitude\n158,amp_T158_warm.tif\n165.5,T165p5_warm_amp.tif\n",
  );
  expect(text("cooldown.yaml")).toContain("#   overview.tif: no word for a channel in its name");
  expect(text("cooldown.yaml")).toContain("#   notes.txt: text that begins with");
  expect(text("cooldown.yaml")).toContain(
    '# thermometry: { log: "log.csv", time: "time", temperature: "T sample (K)", unit: K }',
  );

  const unfilled = coldseam("check", yaml);
  expect(unfilled.code).toBe(1);
  expect(unfilled.err.match(/is left to fill in/g)).toHaveLength(2);
  expect(unfilled.err).toMatch(/cooldown\.yaml:3:\d+: sample is left to fill in; expected the sample's name/);
  expect(unfilled.err).toMatch(/scan\.pixel_size_nm is left to fill in; expected two numbers above 0/);
  // what has a default is written out with it, and with what else it may be
  expect(text("cooldown.yaml")).toContain("  phase: { unit: rad }  # or deg: the names do not say\n");

  const filled = text("cooldown.yaml")
    .replace("sample:", "sample: KV-14")
    .replace("pixel_size_nm:", "pixel_size_nm: [10, 10]");
  writeFileSync(yaml, filled);
  const c = await readCooldown(yaml);
  expect(c.frames.map((f) => [f.branch, f.cycle, f.temperatureK])).toEqual([
    ["cooling", 1, 180],
    ["cooling", 1, 170],
    ["cooling", 1, 160],
    ["warming", 1, 158],
    ["warming", 1, 165.5],
  ]);

  expect(await problemsOf(draft(folder.path))).toEqual(
    ["cooldown.yaml", "frames_cooling.csv", "frames_warming.csv"].map((name) =>
      expect.stringContaining(`${name}: is there already, and is not written over`),
    ),
  );
  expect(text("cooldown.yaml")).toBe(filled);
});

test("no image that could be placed: the reasons, and nothing is written", async () => {
  for (let k = 0; k < 4; k++) folder.stack(`o${k}.tif`, 1);
  folder.stack("scan7_amplitude.tif", 1);
  folder.text("notes.txt", "nice film\n");
  expect(await problemsOf(draft(folder.path))).toEqual([
    expect.stringMatching(
      /: 4 images could not be placed in a series: no word for a channel in its name: o0\.tif, o1\.tif, o2\.tif, and 1 more \| .*\(topography, topo, height, .*\(cooling, .*down, .*up, /,
    ),
    expect.stringMatching(/: 1 image could not be .*: no temperature in its name .*: scan7_amplitude\.tif \| .*165K/),
  ]);
  expect(readdirSync(folder.path)).toEqual([
    "notes.txt",
    "o0.tif",
    "o1.tif",
    "o2.tif",
    "o3.tif",
    "scan7_amplitude.tif",
  ]);
});

test("files whose names differ in a word that is not known are never joined into one series", async () => {
  for (const [word, temperatures] of [
    ["links", [168, 152]],
    ["rechts", [169, 155]],
  ] as const) {
    for (const t of temperatures) {
      folder.stack(`film ${word} AMP ${t} K ${t - 100}.tif`, 1);
      folder.stack(`film ${word} height Z ${t} K.tif`, 1);
    }
  }
  const d = await draftCooldown(folder.path);
  expect(d.files.slice(1)).toEqual(
    [
      ["links", 168, 152],
      ["rechts", 169, 155],
    ].map(([word, ...temperatures]) => ({
      name: `frames_branch_${word}.csv`,
      text: `temperature_K,topography,amplitude\n${temperatures.map((t) => `${t},film ${word} height Z ${t} K.tif,film ${word} AMP ${t} K ${Number(t) - 100}.tif\n`).join("")}`,
    })),
  );
  const yaml = d.files[0]?.text ?? "";
  expect(yaml).toMatch(/branch: {2}# FILL: those with "links": .*\n.*_links\.csv\n.*# FILL: those with "rechts": /);
  expect(d).toMatchObject({ series: 2, frames: 4, toFill: 4, unplaced: 0 });
});

test("runs are kept apart by their number, scans are not; stacks by their words; down and up are the branches", async () => {
  for (const [run, t] of [
    [1, 165],
    [1, 160],
    [2, 161],
    [2, 166],
  ])
    folder.stack(`run${run} scan0${t} ${t}K amp.tif`, 1);
  for (const word of ["down", "up", "c", "w"]) folder.stack(`${word}_amp.tif`, 3);
  const d = await draftCooldown(folder.path);
  const yaml = d.files[0]?.text ?? "";
  expect(d.files.slice(1).map((f) => f.name)).toEqual(["frames_branch_run_1.csv", "frames_branch_run_2.csv"]);
  expect(yaml).toMatch(
    /branch: cooling {2}# from "down" in the names of its files\n {4}stacks:\n {6}amplitude: "down_amp/,
  );
  expect(yaml).toMatch(/branch: warming {2}# from "up" in/);
  expect(yaml).toMatch(/# FILL: those with "c": .*\n {4}stacks:\n {6}amplitude: "c_amp\.tif"/);
  expect(yaml).toMatch(/# FILL: those with "w": .*\n {4}stacks:\n {6}amplitude: "w_amp\.tif"/);
});

test("stacks, sizes and axes in the files are taken; harmonics are a choice; unknown branches are left open", async () => {
  folder.stack("amp_h2.tif", 4);
  folder.stack("amp_h3.tif", 4);
  folder.stack("topo.tif", 4);
  copyFileSync(join(FILES, "run.nxs"), join(folder.path, "warming.nxs"));
  const d = await draftCooldown(folder.path);
  const yaml = d.files[0]?.text ?? "";
  expect(yaml).toContain("pixel_size_nm: [10, 12]  # as warming.nxs:/entry/data/amplitude says of itself");
  expect(yaml).toMatch(
    /branch: warming\n {4}stacks:\n {6}amplitude: "warming\.nxs:\/entry\/data\/amplitude"\n {6}phase: /,
  );
  expect(yaml).toMatch(/# temperatures_K: from the axis of the file \(180 to 170 K\)/);
  expect(yaml).toMatch(/branch: {2}# FILL: cooling or warming/);
  expect(yaml).toMatch(/amplitude: {2}# FILL: "amp_h2\.tif" or "amp_h3\.tif"/);
  expect(yaml).toMatch(/harmonic: {2}# FILL: 2 or 3/);
  expect(yaml).toMatch(/temperatures_K: {2}# FILL: \[ … \], 4 temperatures in K/);
  expect(d.toFill).toBe(yaml.match(/: {2}# FILL/g)?.length);
  folder.text("cooldown.yaml", yaml);
  const found = await problemsOf(readCooldown(join(folder.path, "cooldown.yaml")));
  expect(found.filter((p) => p.includes("is left to fill in"))).toHaveLength(d.toFill);
});

test("several scans at one temperature are kept apart by their numbers; what stays unclear is listed", async () => {
  folder.stack("0007_165K_cooling_amp.tif", 1);
  folder.stack("0007_165K_cooling_phase.tif", 1);
  folder.stack("0008_165K_cooling_amp.tif", 1);
  folder.stack("a_170K_cooling_phase.tif", 1);
  folder.stack("cycle2/160K_warm_amp.tif", 1);
  const d = await draftCooldown(folder.path);
  const yaml = d.files[0]?.text ?? "";
  expect(d.files.map((f) => f.name)).toEqual(["cooldown.yaml", "frames_cooling.csv", "frames_cycle2_warming.csv"]);
  expect(d.files[1]?.text).toBe(
    "temperature_K,amplitude,phase\n165,0007_165K_cooling_amp.tif,0007_165K_cooling_phase.tif\n165,0008_165K_cooling_amp.tif,\n",
  );
  expect(yaml).toContain("#   a_170K_cooling_phase.tif: no amplitude beside it at 170 K");
});

test("names that would break out of YAML, CSV or the terminal do not", async () => {
  folder.stack('amp_165K_cool_"x", y: #.tif', 1);
  folder.stack("amp_166K_cool_\u001b[31m.tif", 1);
  folder.stack("odd\n- branch: warming.tif", 1);
  const d = await draftCooldown(folder.path);
  for (const f of d.files) folder.text(f.name, f.text);
  const yaml = (d.files[0]?.text ?? "")
    .replace("sample:", "sample: S")
    .replace("pixel_size_nm:", "pixel_size_nm: [1, 1]");
  expect(yaml.match(/\p{Cc}/gu)?.every((c) => c === "\n")).toBe(true);
  const c = await readCooldown(folder.text("cooldown.yaml", yaml));
  expect(c.frames.map((f) => f.sources.amplitude.label).sort()).toEqual([
    'amp_165K_cool_"x", y: #.tif',
    "amp_166K_cool_\u001b[31m.tif",
  ]);
});

test("a folder without images, and one that is not there", async () => {
  folder.text("notes.txt", "nothing here\n");
  expect(await problemsOf(draftCooldown(folder.path))).toEqual([
    expect.stringMatching(/no image that can be read \(notes\.txt: text that begins with "nothing here"/),
  ]);
  expect(await problemsOf(draftCooldown(join(folder.path, "none")))).toEqual([expect.stringMatching(/no such file/)]);
});
