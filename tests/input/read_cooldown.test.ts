import { createHash } from "node:crypto";
import { readFileSync, symlinkSync } from "node:fs";
import { join } from "node:path";
import { afterEach, beforeEach, describe, expect, test } from "vitest";
import { describeCooldown, loadFrame, readCooldown, surveyCooldown } from "../../src/input/index.js";
import { CooldownFolder, problemsOf } from "./folder.js";

let folder: CooldownFolder;
beforeEach(() => {
  folder = new CooldownFolder();
});
afterEach(() => folder.remove());

const HEAD = `sample: KV-14
cooldown: kv14-run3
scan:
  pixel_size_nm: [10, 12]
`;
const yaml = (rest: string): string => folder.text("cooldown.yaml", HEAD + rest);

const STACKS = `series:
  - branch: cooling
    stacks:
      topography: ct.tif
      amplitude: ca.tif
      phase: cp.tif
    temperatures_K: [180, 170, 160]
  - branch: warming
    stacks: { amplitude: wa.tif }
    temperatures_K: [160, 180]
`;
function stacks(): void {
  folder.stack("ct.tif", 3);
  folder.stack("ca.tif", 3);
  folder.stack("cp.tif", 3);
  folder.stack("wa.tif", 2);
}

describe("a sound cooldown", () => {
  test("frames in the order of the file, channels that are missing missing, sources once each with their digest", async () => {
    stacks();
    const file = yaml(`region: A
tip: { resolution_nm: 30, resolution_sd_nm: 3 }
light: { photon_energy_meV: 100 }
film: { thickness_nm: 30 }
channels:
  amplitude: { unit: mV }
${STACKS}`);
    const c = await readCooldown(file);
    expect(c).toMatchObject({
      yamlFile: file,
      sample: "KV-14",
      cooldown: "kv14-run3",
      region: "A",
      pixel: { xNm: 10, yNm: 12 },
      tip: { resolutionNm: 30, resolutionSdNm: 3 },
      photonEnergyMeV: 100,
      filmThicknessNm: 30,
      amplitudeUnit: "mV",
      notices: [],
    });
    expect(c.frames.map((f) => [f.frame, f.series, f.branch, f.cycle, f.temperatureK, f.rows, f.cols])).toEqual([
      [0, 0, "cooling", 1, 180, 6, 5],
      [1, 0, "cooling", 1, 170, 6, 5],
      [2, 0, "cooling", 1, 160, 6, 5],
      [3, 1, "warming", 1, 160, 6, 5],
      [4, 1, "warming", 1, 180, 6, 5],
    ]);
    expect(c.frames.map((f) => Object.keys(f.sources).sort().join())).toEqual([
      ...Array<string>(3).fill("amplitude,phase,topography"),
      ...Array<string>(2).fill("amplitude"),
    ]);
    expect(c.frames[1].sources.phase).toEqual({
      file: join(folder.path, "cp.tif"),
      label: "cp.tif#1",
      format: "tiff",
      page: 1,
      scale: 1,
    });
    expect(c.sources.map((s) => s.path)).toEqual(["cooldown.yaml", "ct.tif", "ca.tif", "cp.tif", "wa.tif"]);
    for (const s of c.sources) {
      const content = readFileSync(join(folder.path, s.path));
      expect(s).toMatchObject({ bytes: content.length, sha256: createHash("sha256").update(content).digest("hex") });
    }
    expect(structuredClone(c)).toEqual(c); // it must survive the way to a worker
    expect(describeCooldown(c)).toMatchInlineSnapshot(`
      [
        "cooldown kv14-run3: sample KV-14, region A",
        "  5 frames of 5 × 6 pixels of 10 × 12 nm (0.0500 × 0.0720 µm)",
        "  cycle 1, cooling: 3 frames, 180 to 160 K",
        "  cycle 1, warming: 2 frames, 160 to 180 K",
        "  channels: topography (3 of 5 frames), amplitude in mV, phase (3 of 5 frames)",
        "  tip: 30 ± 3 nm (full width at half maximum)",
        "  light: 100 meV (806.55 cm⁻¹, 12.398 µm)",
        "  film: 30 nm thick",
        "  files: 5, ${(c.sources.reduce((s, f) => s + f.bytes, 0) / 1e6).toFixed(1)} MB",
      ]
    `);
  });

  test("a frames table: any order of columns, a page of a stack, times, stage; blank lines and a byte-order mark", async () => {
    folder.stack("s.tif", 4, 6, 5, (p, i, j) => 100 * p + 10 * i + j);
    folder.text(
      "run/frames.csv",
      "\ufeffphase,amplitude,temperature_K,started_at,ended_at,stage_x_nm,stage_y_nm\r\n" +
        "s.tif#3,s.tif#0,180,2024-05-17T09:00:00Z,2024-05-17T09:40:00Z,-12.5,3e1\r\n\r\n" +
        ",s.tif#1,170.5,,,,\r\n",
    );
    const c = await readCooldown(
      yaml("channels: { phase: { unit: deg } }\nseries:\n- { branch: cooling, frames: run/frames.csv }\n"),
    );
    expect(c.frames).toHaveLength(2);
    expect(c.frames[0]).toMatchObject({
      temperatureK: 180,
      startedAt: "2024-05-17T09:00:00Z",
      endedAt: "2024-05-17T09:40:00Z",
      stageXNm: -12.5,
      stageYNm: 30,
    });
    expect(c.frames[1]).toMatchObject({ temperatureK: 170.5, startedAt: null, stageXNm: null });
    expect(c.sources.map((s) => s.path)).toEqual(["cooldown.yaml", "run/frames.csv", "s.tif"]);
    const raw = await loadFrame(c, c.frames[0]);
    expect(raw.phase?.values.get(2, 3)).toBe(Math.fround((323 * Math.PI) / 180));
    expect(raw.amplitude.values.get(2, 3)).toBe(23); // row 2, column 3
    expect(raw.topography).toBeNull();
    expect((await loadFrame(c, c.frames[1])).phase).toBeNull();
  });

  test.each([
    ["nm", "{ unit: nm }", 1],
    ["um", "{ unit: um }", 1000],
    ["m", "{ unit: m }", 1e9],
    ["V", "{ unit: V, nm_per_unit: -120 }", -120],
    ["no unit", "{}", 1],
  ])("topography in %s", async (_, channel, scale) => {
    folder.stack("t.tif", 1);
    folder.stack("a.tif", 1);
    const c = await readCooldown(
      yaml(`channels:
  topography: ${channel}
series:
  - { branch: cooling, stacks: { topography: t.tif, amplitude: a.tif }, temperatures_K: [180] }
`),
    );
    const raw = await loadFrame(c, c.frames[0]);
    expect(raw.topography?.values.get(1, 2)).toBe(Math.fround(Math.fround(1.12) * scale));
    expect(raw.topography?.pixel).toEqual({ xNm: 10, yNm: 12 });
    expect(raw.amplitude.values.get(1, 2)).toBe(Math.fround(1.12));
  });

  // CODATA 2018: hc = 1239.841984 meV µm, e and h and c exact
  test.each([
    ["wavenumber_per_cm: 806.5543937", 100],
    ["wavelength_um: 12.39841984", 100],
    ["photon_energy_meV: 117.5", 117.5],
  ])("light from %s", async (light, meV) => {
    folder.stack("a.tif", 1);
    const series = "series:\n- { branch: cooling, stacks: { amplitude: a.tif }, temperatures_K: [180] }\n";
    const c = await readCooldown(yaml(`light: { ${light} }\n${series}`));
    expect(c.photonEnergyMeV).toBeCloseTo(meV, 6); // the digits written above
  });

  test("an optional channel without an image, all not-a-number or a filled-in constant, counts as missing", async () => {
    folder.stack("t.tif", 1, 6, 5, () => 0);
    folder.stack("p.tif", 1, 6, 5, () => NaN);
    folder.stack("a.tif", 1, 6, 5, (_, i, j) => (i === 0 ? NaN : j));
    const c = await readCooldown(
      yaml(
        "series:\n- { branch: cooling, stacks: { topography: t.tif, phase: p.tif, amplitude: a.tif }, temperatures_K: [180] }\n",
      ),
    );
    const raw = await loadFrame(c, c.frames[0]);
    expect([raw.topography, raw.phase]).toEqual([null, null]);
    expect(raw.amplitude.values.get(0, 2)).toBeNaN();
    expect(raw.amplitude.values.get(1, 2)).toBe(2);
  });
});

describe("what is wrong is all said at once, with its place and what to do", () => {
  test("an empty description", async () => {
    expect(await problemsOf(readCooldown(folder.text("cooldown.yaml", "")))).toEqual([
      expect.stringMatching(
        /cooldown\.yaml:1:1: the file is empty; expected a map with sample, cooldown, scan and series/,
      ),
    ]);
  });

  test("no such file", async () => {
    expect(await problemsOf(readCooldown(join(folder.path, "none.yaml")))).toEqual([
      expect.stringMatching(/none\.yaml: no such file \| give the path/),
    ]);
  });

  test("misspelt keys, wrong types, missing keys and missing files together", async () => {
    const file = folder.text(
      "cooldown.yaml",
      `sampel: KV-14
cooldown: 14
scan:
  pixel_size_nm: [10, -10]
tip:
  resolution: 30
light:
  photon_energy_meV: 100
  wavelength_um: 12.4
series:
  - branch: colling
    frames: a.csv
  - branch: warming
    frames: gone.csv
`,
    );
    const found = (await problemsOf(readCooldown(file))).map((p) => p.replaceAll(file, "F"));
    expect(found).toEqual([
      'F:1:1: no key "sampel"; did you mean "sample"? | the keys here are sample, cooldown, region, scan, tip, light, film, channels, thermometry, series, exclude',
      "F:2:11: cooldown is 14; expected the cooldown's own name, as text | write it in quotes if it is a number",
      "F:4:23: scan.pixel_size_nm[1] is -10; expected a number of nm above 0 | write for example `pixel_size_nm: [10, 10]`",
      'F:6:3: no key "resolution" in tip; did you mean "resolution_nm"? | the keys here are resolution_nm, resolution_sd_nm',
      "F:8:3: light with 2 of photon_energy_meV, wavenumber_per_cm and wavelength_um; expected one | keep the one that was measured",
      'F:11:13: series[0].branch is "colling"; expected cooling or warming | give the direction of temperature of this series',
      `gone.csv: no such file | check the name of the table, written at F:14:13`,
    ]);
  });

  test.each([
    [
      "a key given twice",
      "region: A\nregion: B\n",
      /cooldown\.yaml:6:1: Map keys must be unique \| keep one of the two/,
    ],
    ["YAML that is none", "region: [A\n", /cooldown\.yaml:\d+:\d+: .* \| mend the YAML/],
    [
      "aliases that swell",
      `a: &a [x, x, x, x, x, x, x, x, x, x]\nb: &b [*a, *a, *a, *a, *a, *a, *a, *a, *a, *a]
c: &c [*b, *b, *b, *b, *b, *b, *b, *b, *b, *b]\nd: &d [*c, *c, *c, *c, *c, *c, *c, *c, *c, *c]\ne: [*d, *d, *d]\n`,
      /Excessive alias count|write the values out/,
    ],
    [
      "two lights",
      "light: { wavelength_um: 12, photon_energy_meV: 100 }\n",
      /:5:\d+: light with 2 of .*; expected one \| keep/,
    ],
    ["no light in light", "light: {}\n", /light with none of/],
    ["volts without calibration", "channels: { topography: { unit: V } }\n", /in V without nm_per_unit/],
    ["calibration without volts", "channels: { topography: { nm_per_unit: 3 } }\n", /nm_per_unit beside the unit nm/],
    ["a tip known to nothing", "tip: { resolution_nm: 30, resolution_sd_nm: 30 }\n", /standard deviation of 30 nm on/],
    [
      "an unknown unit",
      "channels: { phase: { unit: grad } }\n",
      /channels\.phase\.unit is "grad"; expected rad or deg/,
    ],
    ["an empty block", "film:\n", /film is empty; expected a map with thickness_nm/],
  ])("%s", async (_, text, message) => {
    stacks();
    const found = await problemsOf(readCooldown(yaml(text + STACKS)));
    expect(found).toHaveLength(1);
    expect(found[0]).toMatch(message);
  });

  test("a tip wider than a quarter of the field's shorter side is most likely a slip of units, in every size of frame that can be used", async () => {
    for (const [name, pages] of [
      ["ct.tif", 3],
      ["ca.tif", 3],
      ["cp.tif", 3],
      ["wa.tif", 2],
    ] as const)
      folder.stack(name, pages, 20, 30);
    // 30 columns of 10 nm, 20 rows of 12 nm: the shorter side is 240 nm
    const tip = (nm: number): string => `tip: { resolution_nm: ${nm}, resolution_sd_nm: 1 }\n${STACKS}`;
    await expect(readCooldown(yaml(tip(60)))).resolves.toMatchObject({ tip: { resolutionNm: 60 } });
    for (const nm of [60.5, 100_000])
      expect(await problemsOf(readCooldown(yaml(tip(nm))))).toEqual([
        expect.stringMatching(
          new RegExp(
            `cooldown\\.yaml:\\d+:23: tip\\.resolution_nm is ${nm} nm in a field of 300 × 240 nm; expected at most a quarter of its shorter side, 60 nm \\| most likely a slip of units`,
          ),
        ),
      ]);
  });

  test.each([
    [
      "absolute zero",
      "[0, 170, 160]",
      /temperatures_K\[0\] is 0; expected a temperature in K above 0 and at most 1000/,
    ],
    ["degrees Celsius", "[-93, 170, 160]", /temperatures_K\[0\] is -93/],
    ["a furnace", "[1800, 170, 160]", /at most 1000/],
    ["words", "[warm, 170, 160]", /temperatures_K\[0\] is "warm"/],
    ["not a number", "[.nan, 170, 160]", /temperatures_K\[0\] is NaN/],
    [
      "fewer than pages",
      "[180, 170]",
      /^ca\.tif: 3 pages for 2 temperatures \| make temperatures_K .* one temperature a page/,
    ],
    ["more than pages", "[180, 170, 160, 150]", /^ca\.tif: 3 pages for 4 temperatures/],
  ])("temperatures: %s", async (_, list, message) => {
    folder.stack("ca.tif", 3);
    const series = `series:\n- branch: cooling\n  stacks: { amplitude: ca.tif }\n  temperatures_K: ${list}\n`;
    const found = await problemsOf(readCooldown(yaml(series)));
    expect(found).toHaveLength(1);
    expect(found[0]).toMatch(message);
  });

  test.each([
    ["neither", "- branch: cooling\n", /:6:3: a series with neither stacks nor frames/],
    ["both", "- branch: cooling\n  frames: f.csv\n  stacks: { amplitude: ca.tif }\n", /:7:3: a series with both/],
    ["no temperatures", "- branch: cooling\n  stacks: { amplitude: ca.tif }\n", /stacks without temperatures_K/],
    [
      "no amplitude",
      "- branch: cooling\n  stacks: { phase: ca.tif }\n  temperatures_K: [1, 2, 3]\n",
      /stacks\.amplitude is missing/,
    ],
    [
      "one page of a stack",
      "- branch: cooling\n  stacks: { amplitude: ca.tif#1 }\n  temperatures_K: [1]\n",
      /"ca\.tif#1" names one page/,
    ],
    [
      "two kinds of temperatures",
      "- branch: cooling\n  frames: f.csv\n  temperatures_K: [1]\n",
      /temperatures_K beside frames/,
    ],
  ])("series: %s", async (_, text, message) => {
    folder.stack("ca.tif", 3);
    folder.text("f.csv", "temperature_K,amplitude\n180,ca.tif#0\n");
    const found = await problemsOf(readCooldown(yaml(`series:\n${text}`)));
    expect(found).toHaveLength(1);
    expect(found[0]).toMatch(message);
  });

  test("images: missing, not an image, of another size, cut off; each named once", async () => {
    stacks();
    folder.text("ct.tif", "not an image");
    folder.stack("cp.tif", 3, 5, 5);
    const file = join(folder.path, "wa.tif");
    const whole = readFileSync(file);
    folder.text("wa.tif", "");
    expect(await problemsOf(readCooldown(yaml(STACKS)))).toEqual([
      'ct.tif: text that begins with "not an image", not a matrix of numbers; TIFF, .npy, HDF5 and text matrices are read | ' +
        "save it as 32-bit float TIFF or as .npy; begin lines above a matrix with #",
      "wa.tif: the file is empty | copy it again from where it was measured",
      "cp.tif#0: 5 × 5 pixels (and 2 pages more of this file); ca.tif#0 has 5 × 6 | " +
        "all images of a cooldown need one size (columns × rows): crop them alike, or leave this channel or frame out",
    ]);
    expect(whole.length).toBeGreaterThan(0);
  });

  test("a frame with one image of another size is told once, and not read", async () => {
    folder.stack("a.tif", 2);
    folder.stack("t.tif", 1);
    folder.stack("small.tif", 1, 4, 5);
    folder.text("f.csv", "temperature_K,topography,amplitude\n170,t.tif,a.tif#0\n165,small.tif,a.tif#1\n");
    const survey = await surveyCooldown(yaml("series:\n  - { branch: cooling, frames: f.csv }\n"));
    expect(survey.problems.map((p) => `${p.at}: ${p.problem}`)).toEqual(["small.tif: 5 × 4 pixels; a.tif#0 has 5 × 6"]);
    expect(survey.frames.map((f) => f.temperatureK)).toEqual([170]);
  });

  test("what is no number is not said to be in the wrong unit; of tabs the first is told", async () => {
    stacks();
    const found = await problemsOf(readCooldown(yaml(STACKS.replace("[180, 170", "[.nan.0, 1700"))));
    expect(found).toEqual([
      expect.stringMatching(/temperatures_K\[0\] is "\.nan\.0"; .* \| write a number, such as 165\.5/),
      expect.stringMatching(/temperatures_K\[1\] is 1700; .* \| give it in kelvin/),
    ]);
    const tabbed = "series:\n\t- branch: cooling\n\t  stacks:\n\t\tamplitude: ca.tif\n\t  temperatures_K: [1, 2]\n";
    expect(await problemsOf(readCooldown(yaml(tabbed)))).toEqual([
      expect.stringMatching(/cooldown\.yaml:6:1: a tab where the line is indented.* \| put blanks/),
    ]);
  });

  test("a table: each row's mistakes with line and column name", async () => {
    folder.stack("s.tif", 2);
    folder.text(
      "f.csv",
      "temperature_K,amplitude,started_at,ended_at,stage_x_nm,stage_y_nm\n" +
        "-5,s.tif#0,,,,\n" +
        "180,,yesterday,,1,\n" +
        "180,s.tif,,,,\n" +
        "180,s.tif#2,,,,\n" +
        "180,none.npy,2024-05-17T10:00:00Z,2024-05-17T09:00:00Z,,\n" +
        "180,s.tif#1,,,0x10,2\n" +
        "180,s.tif#1\n",
    );
    const found = await problemsOf(readCooldown(yaml("series:\n- { branch: cooling, frames: f.csv }\n")));
    expect(found).toEqual([
      'f.csv:2: temperature_K is "-5"; expected a temperature in K above 0 and at most 1000 | give it in kelvin (0 °C is 273.15 K)',
      "f.csv:3: stage_y_nm is empty; expected a number, as its partner has one | give both",
      'f.csv:3: started_at is "yesterday"; expected a time as ISO 8601 | write for example 2024-05-17T09:30:00+02:00',
      "f.csv:3: amplitude is empty; expected a file: every frame needs it | give the file, or drop the row",
      "f.csv:6: ended_at lies before started_at | mend the times",
      'f.csv:7: stage_x_nm is "0x10"; expected a number of nm | write a plain number, with a point for the decimals',
      "f.csv:8: 2 fields; the header has 6 | put names with a comma in quotes",
      'f.csv:4: amplitude is "s.tif", a stack of 2 pages | say which page: "s.tif#0" is the first',
      'f.csv:5: amplitude is "s.tif#2", but the file has 2 pages | pages count from 0',
    ]);
  });

  test.each([
    ["temperature,amplitude\n1,s.tif#0\n", /no column "temperature"; did you mean "temperature_K"\?/],
    [
      "temperature_K;amplitude\n1;s.tif#0\n",
      /f\.csv:1: the names of the columns are separated by semicolons; expected commas/,
    ],
    ["temperature_K\tamplitude\n1\ts.tif#0\n", /separated by tabs; expected commas \| save the table with commas/],
    ["temperature_K,amplitude,amplitude\n1,s.tif#0,s.tif#1\n", /column "amplitude" stands twice/],
    ["temperature_K,amplitude\n", /a header but no row/],
    ["", /the table is empty/],
    ['temperature_K,amplitude\n1,"s.tif#0\n', /Quote Not Closed.*mend the quotes/],
  ])("a table %j", async (text, message) => {
    folder.stack("s.tif", 2);
    folder.text("f.csv", text);
    const found = await problemsOf(readCooldown(yaml("series:\n- { branch: cooling, frames: f.csv }\n")));
    expect(found.join("\n")).toMatch(message);
  });
});

describe("paths that leave the folder", () => {
  const series = (path: string): string =>
    yaml(`series:\n- { branch: cooling, stacks: { amplitude: "${path}" }, temperatures_K: [180] }\n`);

  test("are refused unless allowed: dots, absolute, links", async () => {
    const outside = new CooldownFolder();
    try {
      outside.stack("a.tif", 1);
      folder.stack("sub/b.tif", 1);
      const target = join(outside.path, "a.tif");
      symlinkSync(target, join(folder.path, "link.tif"));
      symlinkSync(outside.path, join(folder.path, "linked"));
      symlinkSync(join(folder.path, "sub", "b.tif"), join(folder.path, "inner.tif"));
      const upward = join("..", outside.path.split("/").at(-1) ?? "", "a.tif");
      for (const path of [target, upward, "link.tif", "linked/a.tif", "sub/../../x.tif", ".", ".."]) {
        const found = await problemsOf(readCooldown(series(path)));
        expect(found).toHaveLength(1);
        expect(found[0]).toMatch(/folder: ".*" \| .*--allow-outside/);
      }
      for (const path of ["sub/b.tif", "./sub/../sub/b.tif", "inner.tif"]) {
        expect((await readCooldown(series(path))).frames).toHaveLength(1);
      }
      for (const path of [target, upward, "link.tif"]) {
        const c = await readCooldown(series(path), { allowOutside: true });
        expect(c.sources).toHaveLength(2);
      }
    } finally {
      await outside.remove();
    }
  });

  test("in a table", async () => {
    folder.text("f.csv", "temperature_K,amplitude\n180,/etc/hostname\n");
    folder.text("g.csv", "temperature_K,amplitude\n180,../a.tif#2\n");
    const found = await problemsOf(
      readCooldown(
        yaml(
          "series:\n- { branch: cooling, frames: f.csv }\n- { branch: warming, frames: g.csv }\n- { branch: warming, frames: ../h.csv }\n",
        ),
      ),
    );
    expect(found.map((p) => p.split(" | ")[0])).toEqual([
      expect.stringMatching(/cooldown\.yaml:8:30: frames is a path that leads out/),
      'f.csv:2: amplitude is an absolute path, outside the YAML file\'s folder: "/etc/hostname"',
      'g.csv:2: amplitude is a path that leads out of the YAML file\'s folder: "../a.tif#2"',
    ]);
  });
});

test("terminal escape codes in names are shown, not obeyed", async () => {
  folder.stack("a.tif", 1);
  const c = await readCooldown(
    folder.text(
      "cooldown.yaml",
      'sample: "\\e[31mred\\u202e"\ncooldown: "c\\u0007"\nscan: { pixel_size_nm: [10, 10] }\nseries:\n- { branch: cooling, stacks: { amplitude: a.tif }, temperatures_K: [180] }\n',
    ),
  );
  expect(describeCooldown(c)[0]).toBe("cooldown c\\x07: sample \\x1b[31mred\\u202e");
  const found = await problemsOf(
    readCooldown(yaml('"\\e[2Jx": 1\nseries:\n- { branch: cooling, frames: "\\e[2J.csv" }\n')),
  );

  expect(found.join(" ").match(/\p{Cc}/u)).toBeNull();
});
