import { rmSync } from "node:fs";
import { join } from "node:path";
import { afterEach, beforeEach, expect, test } from "vitest";
import { closeImages, loadFrame, readCooldown } from "../../src/input/index.js";
import type { Cooldown } from "../../src/model/cooldown.js";
import { makeRandom } from "../../src/numerics/random.js";
import { InputError } from "../../src/model/errors.js";
import { CooldownFolder, problemsOf } from "./folder.js";

let folder: CooldownFolder;
let cooldown: Cooldown;
beforeEach(async () => {
  folder = new CooldownFolder();
  folder.stack("a.tif", 3);
  const file = folder.text(
    "cooldown.yaml",
    "sample: S\ncooldown: C\nscan: { pixel_size_nm: [10, 12] }\nseries:\n" +
      "- { branch: cooling, stacks: { amplitude: a.tif }, temperatures_K: [180, 170, 160] }\n",
  );
  cooldown = await readCooldown(file);
});
afterEach(() => folder.remove());

test("frames in any order and at the same time", async () => {
  const order = [2, 0, 1, 1, 2, 0];
  const frames = await Promise.all(order.map((k) => loadFrame(cooldown, cooldown.frames[k])));
  expect(frames.map((f) => f.frame)).toEqual(order);
  expect(frames.map((f) => f.amplitude.values.get(0, 0))).toEqual(order.map((k) => 1 + k));
});

test("a file that has gone, shrunk or changed its size since it was checked", async () => {
  await loadFrame(cooldown, cooldown.frames[2]);
  folder.stack("a.tif", 2);
  expect(await problemsOf(loadFrame(cooldown, cooldown.frames[2]))).toEqual([
    "a.tif#2: no such page any more: the file changed while it was read | run again when it is written",
  ]);
  folder.stack("a.tif", 3, 5, 5);
  expect(await problemsOf(loadFrame(cooldown, cooldown.frames[2]))).toEqual([
    "a.tif#2: now 5 × 5 pixels: the file changed while it was read | run again when it is written",
  ]);
  await closeImages();
  rmSync(join(folder.path, "a.tif"));
  expect(await problemsOf(loadFrame(cooldown, cooldown.frames[2]))).toEqual([
    "a.tif#2: no such file | check the name and that the file is there and may be read",
  ]);
});

test("160 descriptions with characters changed at random: a cooldown or an error in words, nothing else", async () => {
  const random = makeRandom(7);
  const table = "temperature_K,amplitude,started_at\n180,a.tif#0,2024-05-17T09:00:00Z\n170,a.tif#1,\n";
  const text =
    "sample: S\ncooldown: C\nscan:\n  pixel_size_nm: [10, 12]\nlight: { photon_energy_meV: 100 }\nchannels:\n  phase: { unit: deg }\n" +
    "series:\n- branch: cooling\n  stacks: { amplitude: a.tif }\n  temperatures_K: [180, 170, 160]\n- { branch: warming, frames: f.csv }\n" +
    'thermometry: { log: log.csv, time: t, temperature: s, unit: C, lag_s: 9, time_zone: "+02:00" }\n' +
    "exclude:\n- { frame: 1, region_nm: [0, 0, 20, 20], reason: speck }\n";
  const log = "t;s\n2024-05-17T10:00:00;-93\n2024-05-17T11:00:00;-94\n2024-05-17T12:00:00Z;-95\n";
  const letters = "\n\t :-[]{},#&*!|>'\"%@`0.aeK\0\u00e9\u202e/..~";
  const mutate = (s: string): string => {
    let out = s;
    for (let n = 1 + random.below(2); n > 0; n--) {
      const at = random.below(out.length);
      const letter = letters[random.below(letters.length)];
      const cut = random.below(3);
      out = out.slice(0, at) + (random.below(4) === 0 ? "" : letter) + out.slice(at + cut);
    }
    return out;
  };
  let sound = 0;
  folder.text("f.csv", table);
  folder.text("log.csv", log);
  expect((await readCooldown(folder.text("fuzz.yaml", text))).frames).toHaveLength(5);
  for (let k = 0; k < 160; k++) {
    const file = folder.text("fuzz.yaml", k % 2 === 0 ? mutate(text) : text);
    folder.text("f.csv", k % 4 === 1 ? mutate(table) : table);
    folder.text("log.csv", k % 4 === 3 ? mutate(log) : log);
    try {
      const c = await readCooldown(file);
      expect(c.frames.length).toBeGreaterThan(0);
      sound++;
    } catch (e) {
      if (!(e instanceof InputError)) throw e;
      expect(e.problems.length).toBeGreaterThan(0);
      for (const p of e.problems) expect(p.at !== "" && p.problem.length > 5 && p.fix.length > 5).toBe(true);
    }
  }
  expect(sound).toBeGreaterThan(6);
  expect(sound).toBeLessThan(154);
});
