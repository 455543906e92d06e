import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { listHdf5 } from "../input/hdf5.js";
import { withImage } from "../input/image_file.js";
import { closeImages, describeCooldown, inspectFrame, loadFrame, surveyCooldown } from "../input/index.js";
import { InputError, type Problem } from "../model/errors.js";
import { childSeed, makeRandom } from "../numerics/random.js";
import { spoil } from "./fuzz_mutate.js";
import { makeSeeds, type Kind, type Seed } from "./fuzz_seeds.js";

/** What became of one spoilt cooldown. */
export interface FuzzCase {
  readonly k: number;
  readonly kind: Kind;
  readonly seed: string;
  /** `wrong`: neither an error in words nor a sound result. */
  readonly outcome: "error" | "sound" | "wrong";
  /** What was wrong. */
  readonly words: string;
  /** Processor time, which other work on the machine does not lengthen. */
  readonly ms: number;
  /** Largest resident memory of the process so far. */
  readonly peakBytes: number;
}

/** The text of an error, as printed, may be this long. */
const MOST_PRINTED = 64 * 1024;

/** Reads a cooldown as `coldseam check` does. Returns what is unsound in what it gave; throws InputError where it is refused. */
async function readAll(yaml: string): Promise<string> {
  const { cooldown, problems, frames, pixel } = await surveyCooldown(yaml);
  const found: Problem[] = [...problems];
  const unsound: string[] = [];
  if (cooldown !== null) describeCooldown(cooldown);
  for (const info of frames) {
    if (cooldown !== null && !(info.temperatureK > 0 && info.temperatureK <= 1000))
      unsound.push(`frame ${info.frame}: ${info.temperatureK} K`);
    try {
      const frame = await loadFrame({ pixel: pixel ?? { xNm: 1, yNm: 1 } }, info);
      inspectFrame(frame, info);
      for (const raster of [frame.topography, frame.amplitude, frame.phase]) {
        if (raster === null) continue;
        const [rows, cols] = raster.values.shape;
        if (rows !== info.rows || cols !== info.cols || raster.values.data.length !== rows * cols)
          unsound.push(`frame ${info.frame}: ${rows} × ${cols} pixels for ${info.rows} × ${info.cols}`);
      }
    } catch (e) {
      if (!(e instanceof InputError)) throw e;
      found.push(...e.problems);
    }
  }
  if (unsound.length > 0) return unsound.join("; ");
  if (found.length > 0) throw new InputError(found);
  if (cooldown === null || cooldown.frames.length === 0) return "neither frames nor a word why";
  return "";
}

/** What is amiss with the words of an error themselves. */
function amiss(e: InputError): string {
  const empty = e.problems.find((p) => p.at.length === 0 || p.problem.length < 4 || p.fix.length < 4);
  if (empty !== undefined) return `an error without words: ${JSON.stringify(empty)}`;
  const printed = e.problems.reduce((n, p) => n + p.at.length + p.problem.length + p.fix.length, 0);
  return printed > MOST_PRINTED ? `an error of ${printed} characters in ${e.problems.length} problems` : "";
}

async function run(seeds: readonly Seed[], folder: string, k: number, seed: number): Promise<FuzzCase> {
  const random = makeRandom(childSeed(seed, 1, k));
  const chosen = choose(seeds, k, random.below(1 << 30));
  const others = choose(seeds, k, random.below(1 << 30));
  const own = path.join(folder, String(k % 8));
  rmSync(own, { recursive: true, force: true });
  mkdirSync(own);
  for (const [name, content] of Object.entries(chosen.files)) {
    const bytes = name === chosen.spoil ? spoil(content, chosen.kind, random, others.files[others.spoil]) : content;
    writeFileSync(path.join(own, name), bytes);
  }
  const before = process.cpuUsage();
  let outcome: FuzzCase["outcome"] = "sound";
  let words = "";
  try {
    words = await readAll(path.join(own, "cooldown.yaml"));
    if (words !== "") outcome = "wrong";
  } catch (e) {
    words = e instanceof InputError ? amiss(e) : e instanceof Error ? (e.stack ?? e.message) : String(e);
    outcome = words === "" ? "error" : "wrong";
  }
  await closeImages();
  const { user, system } = process.cpuUsage(before);
  const ms = (user + system) / 1000;
  return {
    ms,
    k,
    kind: chosen.kind,
    seed: chosen.name,
    outcome,
    words,
    peakBytes: process.resourceUsage().maxRSS * 1024,
  };
}

/** The kinds take turns, whatever number of seeds each has. */
function choose(seeds: readonly Seed[], k: number, draw: number): Seed {
  const kinds = [...new Set(seeds.map((s) => s.kind))];
  const own = seeds.filter((s) => s.kind === kinds[k % kinds.length]);
  return own[draw % own.length];
}

/** The process of its own that `fuzz.ts` starts: cases `from` to `to`, one message after each. */
async function main(from: number, to: number, seed: number): Promise<void> {
  const folder = mkdtempSync(path.join(process.env["COLDSEAM_FUZZ_DIR"] ?? tmpdir(), "fuzz-"));
  let current = from;
  const broken = (e: unknown): void => {
    const words = `outside of any call: ${e instanceof Error ? (e.stack ?? e.message) : String(e)}`;
    process.send?.({ broken: words, k: current });
  };
  process.on("uncaughtException", broken);
  process.on("unhandledRejection", broken);
  const seeds = await makeSeeds(async (file, dataset) => {
    try {
      return await withImage(
        file,
        async (image) => {
          const [first, ...more] = image.pages;
          await image.read(0, 1, first?.planes === 1 ? undefined : 0);
          return { pages: 1 + more.length, complex: first?.complex ?? false, planes: first?.planes ?? 1 };
        },
        dataset,
      );
    } catch {
      return null;
    }
  }, listHdf5);
  await closeImages();
  for (current = from; current < to; current++) process.send?.(await run(seeds, folder, current, seed));
  rmSync(folder, { recursive: true, force: true });
  process.disconnect();
}

const [from, to, seed] = process.argv.slice(2).map(Number);
if (process.send !== undefined) await main(from, to, seed);
