import { spawn } from "node:child_process";
import { appendFileSync, mkdirSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, expect, test } from "vitest";
import { createTiff } from "../../src/demo/write_tiff.js";
import { generateStack, mergeSpec } from "../../src/demo/index.js";
import { loadFrame, readCooldown } from "../../src/input/index.js";
import { CHANNELS, type FrameInfo, type RawFrame } from "../../src/model/cooldown.js";
import { openForReading } from "../../src/store/open.js";
import { stateOf, tinyCooldown } from "../../src/study/survival.js";
import { coldseam, TOP } from "./program.js";

let dir: string;
const frames: { info: FrameInfo; raw: RawFrame }[] = [];
let head: string;
const at = (...names: string[]): string => path.join(dir, ...names);

beforeAll(async () => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-watch-"));
  const yaml = generateStack(
    mergeSpec(tinyCooldown("kv32", 3), {
      rows: 48,
      cols: 48,
      domains: { scaleNm: 120 },
      series: [
        { branch: "cooling", temperaturesK: [180, 153, 120] },
        { branch: "warming", temperaturesK: [150, 160, 190] },
      ],
    }),
    at("made"),
  );
  const cooldown = await readCooldown(yaml);
  for (const info of cooldown.frames) frames.push({ info, raw: await loadFrame(cooldown, info) });
  head = readFileSync(yaml, "utf8").split(/^series:/m)[0] ?? "";
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

/** Writes the pages of some frames as the stack of one channel, or one frame's image. */
function write(file: string, channel: (typeof CHANNELS)[number], which: readonly number[]): void {
  const writer = createTiff(file);
  for (const k of which) {
    const raster = frames[k]?.raw[channel];
    if (raster == null) throw new Error(`frame ${k} has no ${channel}`);
    const [rows, cols] = raster.values.shape as [number, number];
    writer.addPage(raster.values.data, rows, cols);
  }
  writer.close();
}

/** The program watching. */
class Watching {
  readonly #child;
  #text = "";
  #waiting: { words: RegExp; resolve: () => void }[] = [];
  readonly ended: Promise<number | null>;

  constructor(...args: string[]) {
    const entry = path.join(TOP, "scripts/coldseam.mjs");
    this.#child = spawn(process.execPath, [entry, "ingest", "--watch", "--every", "0.05", "--workers", "0", ...args]);
    const hear = (d: Buffer): void => {
      this.#text += d.toString();
      this.#waiting = this.#waiting.filter((w) => {
        if (!w.words.test(this.#text)) return true;
        w.resolve();
        return false;
      });
    };
    this.#child.stdout.on("data", hear);
    this.#child.stderr.on("data", hear);
    this.ended = new Promise((resolve) => this.#child.on("close", resolve));
  }

  get text(): string {
    return this.#text;
  }

  /** Waits for words in all that was said; fails with all that was said where the program ends without them. */
  async until(words: RegExp): Promise<void> {
    const seen = new Promise<void>((resolve) => {
      if (words.test(this.#text)) resolve();
      else this.#waiting.push({ words, resolve });
    });
    const ended = this.ended.then((code) => {
      if (!words.test(this.#text))
        throw new Error(`ended with ${String(code)} before ${String(words)}:\n${this.#text}`);
    });
    await Promise.race([seen, ended]);
  }

  stop(signal: NodeJS.Signals): void {
    this.#child.kill(signal);
  }
}

function analysesIn(db: string): { id: number; frames: number }[] {
  const file = openForReading(db);
  try {
    return file
      .prepare<[], { id: number; frames: number }>(
        "SELECT a.id, count(*) AS frames FROM analysis a JOIN frame f ON f.analysis_id = a.id GROUP BY a.id",
      )
      .all();
  } finally {
    file.close();
  }
}

test("rows of a table are taken in as they come; half of a file is waited for; each analysis takes the place of the one before", async () => {
  const folder = at("table");
  mkdirSync(folder);
  const row = (k: number): string =>
    `${frames[k]?.info.temperatureK},${CHANNELS.map((c) => `${c}${k}.tif`).join(",")}\n`;
  const images = (k: number): void => CHANNELS.forEach((c) => write(path.join(folder, `${c}${k}.tif`), c, [k]));
  const yaml = path.join(folder, "cooldown.yaml");
  const table = path.join(folder, "cooling.csv");
  writeFileSync(yaml, `${head}series:\n- branch: cooling\n  frames: cooling.csv\n`);
  const db = at("table.sqlite");

  // The table is not even there yet.
  const run = new Watching(yaml, "--db", db, "--until", "3");
  await run.until(/waiting: cooling\.csv: no such file/);
  writeFileSync(table, `temperature_K,${CHANNELS.join(",")}\n${row(0)}`);
  await run.until(/waiting: (topography|amplitude|phase)0\.tif: no such file/);
  images(0);
  await run.until(/kv32: 1 frame stored in .* as analysis 1\n/);
  expect(analysesIn(db)).toEqual([{ id: 1, frames: 1 }]);

  // The row before its images, one of these cut off, then whole.
  appendFileSync(table, row(1));
  await run.until(/waiting: (topography|amplitude|phase)1\.tif: no such file/);
  write(path.join(folder, "topography1.tif"), "topography", [1]);
  write(path.join(folder, "phase1.tif"), "phase", [1]);
  write(path.join(dir, "whole.tif"), "amplitude", [1]);
  const bytes = readFileSync(path.join(dir, "whole.tif"));
  writeFileSync(path.join(folder, "amplitude1.tif"), bytes.subarray(0, bytes.length - 700));
  await run.until(/waiting: amplitude1\.tif.*cut off/);
  writeFileSync(path.join(folder, "amplitude1.tif"), bytes);
  await run.until(/kv32: 2 frames stored in .* as analysis 2\n {2}frame 1, cooling, [\d.]+ K: /);
  expect(analysesIn(db)).toEqual([{ id: 2, frames: 2 }]);

  // Half of a row, and a description that is rewritten under the program's eyes.
  writeFileSync(yaml, head.slice(0, head.length / 2).replace(/\n$/, "") + ": [");
  images(2);
  appendFileSync(table, row(2).slice(0, 12));
  await run.until(/waiting: .*cooldown\.yaml:\d+:\d+: /);
  writeFileSync(yaml, `${head}series:\n- branch: cooling\n  frames: cooling.csv\n`);
  await run.until(/waiting: cooling\.csv:4: /);
  appendFileSync(table, row(2).slice(12));
  expect(await run.ended).toBe(0);
  expect(run.text).toMatch(/kv32: 3 frames stored in .* as analysis 3\n/);
  expect(run.text).toMatch(/metallic fraction\n {2}1\.0 \|/);
  expect(run.text).toMatch(/3 frames taken in, as many as --until says\n$/);
  expect(analysesIn(db)).toEqual([{ id: 3, frames: 3 }]);
  expect(stateOf(db)).toEqual({ analyses: [3], wrong: [] });

  // What was watched is what an ingest of the whole makes: nothing is left to do.
  expect(coldseam("ingest", yaml, "--db", db).out).toMatch(/already in .* as analysis 3/);
});

test("while the sample cools the table of the warming is not there yet, or empty: the cooling is taken in all the same", async () => {
  const folder = at("warming");
  mkdirSync(folder);
  const row = (k: number): string =>
    `${frames[k]?.info.temperatureK},${CHANNELS.map((c) => `${c}${k}.tif`).join(",")}\n`;
  const images = (k: number): void => CHANNELS.forEach((c) => write(path.join(folder, `${c}${k}.tif`), c, [k]));
  const yaml = path.join(folder, "cooldown.yaml");
  const table = `temperature_K,${CHANNELS.join(",")}\n`;
  const [c, w] = ["c.csv", "w.csv"].map((name) => path.join(folder, name)) as [string, string];
  writeFileSync(yaml, `${head}series:\n- { branch: cooling, frames: c.csv }\n- { branch: warming, frames: w.csv }\n`);
  images(0);
  writeFileSync(c, table + row(0));
  const run = new Watching(yaml, "--db", at("warming.sqlite"), "--until", "3");
  await run.until(/1 frame stored in [^]*waiting: w\.csv: no such file\n/);
  // Another frame, then the table's head, then its first row.
  images(1);
  appendFileSync(c, row(1));
  await run.until(/2 frames stored in [^]*waiting for more/);
  writeFileSync(w, table);
  await run.until(/waiting: w\.csv: a header but no row/);
  images(3);
  appendFileSync(w, row(3));
  expect(await run.ended).toBe(0);
  expect(run.text).toMatch(/3 frames stored in .*\n {2}frame 2, warming, 150 K/);
  expect(run.text.match(/waiting: w\.csv: no such file/g)).toHaveLength(1);
  expect(run.text.match(/a header but no row/g)).toHaveLength(1);
});

test("pages of a stack whose temperatures are planned; Ctrl-C ends it with a word, and another day it goes on", async () => {
  const folder = at("stack");
  mkdirSync(folder);
  const yaml = path.join(folder, "cooldown.yaml");
  const planned = (branch: string, from: number): string =>
    `- branch: ${branch}\n  stacks: { topography: ${branch}_t.tif, amplitude: ${branch}_a.tif, phase: ${branch}_p.tif }\n` +
    `  temperatures_K: [${frames
      .slice(from, from + 3)
      .map((f) => f.info.temperatureK)
      .join(", ")}]\n`;
  const stacks = (branch: string, which: readonly number[]): void => {
    for (const c of CHANNELS) write(path.join(folder, `${branch}_${c.slice(0, 1)}.tif`), c, which);
  };
  writeFileSync(
    yaml,
    `${head}series:\n${planned("cooling", 0)}${planned("warming", 3)}exclude:\n- { frame: 4, reason: tip changed }\n`,
  );
  const db = at("stack.sqlite");
  stacks("cooling", [0, 1]);
  const run = new Watching(yaml, "--db", db);
  await run.until(/kv32: 2 frames stored in .* as analysis 1\n[^]*waiting for more; Ctrl-C ends it\n/);
  await run.until(/waiting: cooling_t\.tif: 2 pages for 3 temperatures\n/);
  run.stop("SIGINT");
  expect(await run.ended).toBe(0);
  expect(run.text).toMatch(/stopped; .*stack\.sqlite holds the 2 frames taken in, as analysis 1\n$/);

  const again = new Watching(yaml, "--db", db);
  await again.until(/kv32: 2 frames, already in .* as analysis 1\n/);
  stacks("cooling", [0, 1, 2]);
  await again.until(/kv32: 3 frames stored in .* as analysis 2\n/);
  stacks("warming", [3, 4]);
  await again.until(/kv32: 5 frames stored in .* as analysis 3\n {2}frame 4, warming, /);
  again.stop("SIGTERM");
  expect(await again.ended).toBe(0);
  expect(again.text).toMatch(/note: frame 4: left out: tip changed/);
  expect(stateOf(db)).toEqual({ analyses: [3], wrong: [] });
});

test("nothing taken in, and stopped; a cooldown that stands for something else is refused at once; slips in the options", async () => {
  const folder = at("none");
  mkdirSync(folder);
  const yaml = path.join(folder, "cooldown.yaml");
  writeFileSync(yaml, `${head}series:\n- branch: cooling\n  frames: cooling.csv\n`);
  const run = new Watching(yaml, "--db", at("none.sqlite"));
  await run.until(/waiting: cooling\.csv: no such file/);
  run.stop("SIGINT");
  expect(await run.ended).toBe(0);
  expect(run.text).toMatch(/stopped; nothing was taken in\n$/);

  const db = at("other.sqlite");
  const whole = at("made/cooldown.yaml");
  expect(coldseam("ingest", whole, "--db", db, "--workers", "1")).toMatchObject({ code: 0 });
  const other = at("made/other.yaml");
  writeFileSync(other, readFileSync(whole, "utf8").replace(/^sample: .*$/m, "sample: another"));
  const refused = new Watching(other, "--db", db);
  expect(await refused.ended).toBe(1);
  expect(refused.text).toMatch(/already holds a cooldown "kv32" with other content: sample/);

  for (const [args, words] of [
    [["--until", "3"], /--until says nothing without --watch/],
    [["--watch", "--until", "soon"], /--until soon: expected a number of frames/],
    [["--watch", "--every", "0"], /--every 0: expected seconds/],
  ] as const) {
    const r = coldseam("ingest", yaml, "--db", at("none.sqlite"), ...args);
    expect(r.code).toBe(2);
    expect(r.err).toMatch(words);
  }
  const missing = coldseam("ingest", at("nowhere.yaml"), "--db", at("none.sqlite"), "--watch");
  expect(missing.code).toBe(1);
  expect(missing.err).toMatch(/nowhere\.yaml: no such file/);
});
