import { mkdirSync, rmSync, statSync } from "node:fs";
import path from "node:path";
import { readTruth } from "../demo/index.js";
import { openForReading } from "../store/open.js";
import { errorsOf, largest, rms, scoreCooldown, type Score } from "../study/score.js";
import { TABLES } from "../tables/columns.js";
import { demo } from "./demo.js";
import { exportTable } from "./export.js";
import { figure } from "./figure.js";
import { ingest } from "./ingest.js";
import { loops } from "./loops.js";
import { report } from "./report.js";
import { print, sayError } from "./say.js";

/** What the demo promises; the same bounds are asserted on its smaller copy by the tests. */
export interface Kept {
  readonly what: string;
  readonly found: string;
  readonly bound: string;
  readonly holds: boolean;
}

const median = (v: readonly number[]): number => {
  const s = [...v].sort((a, b) => a - b);
  return s.length === 0 ? Number.NaN : ((s[(s.length - 1) >> 1] as number) + (s[s.length >> 1] as number)) / 2;
};

/** The distances from the truth that the demo prints, each with its bound. */
export function promisesOf(score: Score, hasFringes: boolean): Kept[] {
  const drift = largest(score.driftPx);
  const fraction = largest(score.fraction);
  const half = largest(score.halfK);
  const width = median(errorsOf(score.medianWidth));
  const wrongFringes = hasFringes ? score.fringesWrongSide : score.fringesDetected;
  return [
    {
      what: "drift, largest error of an axis",
      found: `${drift.toFixed(3)} px (rms ${rms(errorsOf(score.driftPx)).toFixed(3)}), ${score.framesNotPlaced} frames not placed`,
      bound: "0.15 px",
      holds: drift <= 0.15 && score.framesNotPlaced === 0,
    },
    {
      what: "metallic fraction, largest error",
      found: `${fraction.toFixed(4)}, ${score.framesUndecided} undecided`,
      bound: "0.01",
      holds: fraction <= 0.01 && score.framesUndecided === 0,
    },
    {
      what: "half temperatures, largest error",
      found: `${half.toFixed(2)} K`,
      bound: `half a step, ${(score.stepK / 2).toFixed(2)} K`,
      holds: score.halfK.length > 0 && half <= score.stepK / 2,
    },
    {
      what: "median wall width, median over frames",
      found: `${(100 * width).toFixed(1)} % (largest ${(100 * largest(score.medianWidth)).toFixed(1)} %)`,
      bound: "5 %",
      holds: Math.abs(width) <= 0.05,
    },
    {
      what: `frames of one state (${score.singleStateFrames}): profiles found; fraction not 0 or 1`,
      found: `${score.singleStateProfiles}; ${score.singleStateWrong}`,
      bound: "0; 0",
      holds: score.singleStateProfiles === 0 && score.singleStateWrong === 0,
    },
    {
      what: hasFringes
        ? "fringes found, of stretches tested (on the wrong side)"
        : "fringes found where there are none, of stretches tested",
      found: hasFringes
        ? `${score.fringesDetected} of ${score.fringesTested} (${wrongFringes})`
        : `${wrongFringes} of ${score.fringesTested}`,
      bound: hasFringes ? "at least 9 in 10" : "0",
      holds: hasFringes
        ? score.fringesDetected >= 0.9 * score.fringesTested && score.fringesTested > 0
        : wrongFringes === 0,
    },
  ];
}

/** `npm run demo`: the main job on the invented film, and how far what was found is from the truth. Returns the exit code. */
export async function runDemo(args: readonly string[]): Promise<number> {
  const dir = args.find((a) => !a.startsWith("--")) ?? "demo-output";
  const small = args.includes("--small");
  try {
    rmSync(dir, { recursive: true, force: true });
    mkdirSync(dir, { recursive: true });
    const files = demo(path.join(dir, "cooldowns"), { size: small ? "small" : "full" });
    const db = path.join(dir, "demo.sqlite");
    for (const yaml of files) await ingest(yaml, { db, cache: false });
    print("\n");
    loops({ db, format: "text" });

    const tables = path.join(dir, "tables");
    mkdirSync(tables);
    for (const t of TABLES) await exportTable(t.name, { db, format: "csv", out: path.join(tables, `${t.name}.csv`) });

    const drawing = path.join(dir, "loop.svg");
    await figure("loop", { db, out: drawing });
    const page = path.join(dir, "report.html");
    await report({ db, out: page });

    print("\nHow far that is from the truth:\n");
    let all = true;
    const handle = openForReading(db);
    try {
      for (const yaml of files) {
        const truth = readTruth(path.dirname(yaml));
        print(`${truth.cooldown}\n`);
        for (const p of promisesOf(scoreCooldown(handle, truth), truth.hasFringes)) {
          all &&= p.holds;
          print(`  ${p.holds ? "ok " : "OFF"} ${p.what}: ${p.found}  [${p.bound}]\n`);
        }
      }
    } finally {
      handle.close();
    }
    print(
      `\ndatabase: ${db} (${(statSync(db).size / 1e6).toFixed(1)} MB)   tables: ${tables}/*.csv   truth: beside each cooldown.yaml\n`,
    );
    print(`loop figure: ${drawing}\n`);
    print(`the page to look through it all, in any browser: ${page}\n`);
    print(`next: npm run -s coldseam -- walls --db ${db}\n`);
    return all ? 0 : 1;
  } catch (e) {
    return sayError(e, args.includes("--verbose"));
  }
}
