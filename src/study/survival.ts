import { spawn, spawnSync } from "node:child_process";
import { existsSync, mkdtempSync, rmSync, statSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { fileURLToPath } from "node:url";
import { defaultSpec, generateStack, type CooldownSpec } from "../demo/index.js";
import { childSeed, makeRandom } from "../numerics/random.js";
import { openForReading, openForWriting, type Db } from "../store/open.js";
import { verifyDatabase } from "../store/verify.js";

/** When to kill a run: so long after it has said so many lines on standard error. */
export interface Moment {
  readonly afterLines: number;
  readonly delayMs: number;
}

export interface Killed {
  readonly moment: Moment;
  /** False where the run had ended before. */
  readonly inTime: boolean;
  /** Wall time from its start to its end, ms. */
  readonly livedMs: number;
}

/** Starts a command and kills it with SIGKILL at the moment; resolves when it is gone. */
export function runAndKill(command: readonly string[], moment: Moment): Promise<Killed> {
  return new Promise((resolve, reject) => {
    const started = performance.now();
    const child = spawn(command[0] ?? "", command.slice(1), { stdio: ["ignore", "ignore", "pipe"] });
    let lines = 0;
    let due = false;
    const aim = (): void => {
      if (due || lines < moment.afterLines) return;
      due = true;
      setTimeout(() => child.kill("SIGKILL"), moment.delayMs);
    };
    child.stderr.on("data", (d: Buffer) => {
      for (const byte of d) if (byte === 10) lines++;
      aim();
    });
    child.on("error", reject);
    child.on("close", (_code, signal) =>
      resolve({ moment, inTime: signal === "SIGKILL", livedMs: performance.now() - started }),
    );
    aim();
  });
}

/** Moments spread over a run that says `lines` lines: three quarters of them from its start to its last line, the rest after that line,
 *  when the result is stored. Seeded delays of up to `spreadMs`, the time from one line to the next. */
export function spreadMoments(count: number, lines: number, spreadMs: number, seed: number): Moment[] {
  const before = Math.ceil(0.75 * count);
  return Array.from({ length: count }, (_, k) => {
    const delayMs = Math.round(makeRandom(childSeed(seed, k)).uniform() * spreadMs);
    return { afterLines: k < before ? Math.floor((k * lines) / before) : lines, delayMs };
  });
}

/** Numbers of the analyses in a database, and everything that is wrong with it. */
export function stateOf(file: string): { analyses: number[]; wrong: string[] } {
  if (!existsSync(file) || statSync(file).size === 0) return { analyses: [], wrong: [] };
  let db: Db;
  try {
    db = openForReading(file);
  } catch (e) {
    const text = e instanceof Error ? e.message : String(e);
    // Killed between making the file and its first table: nothing is in it yet, and the next ingest goes on from there.
    if (!text.includes("no ingest into it was ever finished")) return { analyses: [], wrong: [text] };
    openForWriting(file).close();
    db = openForReading(file);
  }
  try {
    const wrong = [...verifyDatabase(db)].flatMap((c) => c.problems.map((p) => `${c.name}: ${p}`));
    return { analyses: db.prepare<[], number>("SELECT id FROM analysis ORDER BY id").pluck().all(), wrong };
  } finally {
    db.close();
  }
}

export function removeDatabase(file: string): void {
  for (const end of ["", "-wal", "-shm", "-journal"]) rmSync(`${file}${end}`, { force: true });
}

export interface SurvivalReport {
  readonly kills: number;
  /** Runs that had ended before they could be killed. */
  readonly late: number;
  /** Databases without and with the new analysis after the kill. */
  readonly none: number;
  readonly whole: number;
  /** What was wrong after a kill, or after the run that followed it. */
  readonly wrong: readonly string[];
}

/** Kills an ingest at many moments, each time into a new file; looks at what is left, runs it again and looks again.
 *  @param again whether each killed ingest is run again to its end; otherwise only the last */
export async function killIngests(
  command: (db: string) => readonly string[],
  dir: string,
  moments: readonly Moment[],
  again: "each" | "last",
): Promise<SurvivalReport> {
  const wrong: string[] = [];
  let late = 0;
  let whole = 0;
  for (const [k, moment] of moments.entries()) {
    const db = path.join(dir, `killed-${k}.sqlite`);
    let delayMs = moment.delayMs;
    let killed: Killed;
    // A machine is not always equally fast: a run that had ended before is tried again, and killed sooner.
    do {
      removeDatabase(db);
      killed = await runAndKill(command(db), { ...moment, delayMs });
      delayMs /= 2;
    } while (!killed.inTime && delayMs > 1);
    const { inTime } = killed;
    const at = `killed ${(2 * delayMs).toFixed(0)} ms after ${moment.afterLines} lines`;
    if (!inTime) late++;
    const left = stateOf(db);
    wrong.push(...left.wrong.map((w) => `${at}: ${w}`));
    if (left.analyses.length > 0) whole++;
    if (!inTime && left.analyses.length !== 1) wrong.push(`${at}: the run ended by itself and stored nothing`);
    if (again === "each" || k === moments.length - 1) {
      const [program = "", ...args] = command(db);
      const r = spawnSync(program, args, { encoding: "utf8" });
      if (r.status !== 0) wrong.push(`${at}: running again ended with ${String(r.status)}: ${r.stderr}`);
      const then = stateOf(db);
      wrong.push(...then.wrong.map((w) => `${at}, then run again: ${w}`));
      if (then.analyses.length !== 1) wrong.push(`${at}, then run again: ${then.analyses.length} analyses`);
    }
    removeDatabase(db);
  }
  return { kills: moments.length, late, none: moments.length - whole, whole, wrong };
}

/** A cooldown that is analysed in a moment; its walls cross the field at the middle temperature. */
export function tinyCooldown(name: string, seed: number, temperatures = 2): CooldownSpec {
  const spread = (from: number, to: number): number[] =>
    Array.from({ length: temperatures }, (_, k) => from + ((to - from) * (k + 0.5)) / temperatures);
  return defaultSpec({
    sample: "KV-30",
    cooldown: name,
    seed,
    rows: 32,
    cols: 32,
    series: [
      { branch: "cooling", temperaturesK: spread(168, 138) },
      { branch: "warming", temperaturesK: spread(146, 176) },
    ],
    domains: { scaleNm: 60 },
    drift: { stepSdNm: 8, jumpChance: 0, limitNm: 30 },
    debris: { perUm2: 0 },
    scars: { perFrame: 0.5, maxLengthPx: 10 },
    unmeasured: { chance: 0 },
  });
}

const PROGRAM = path.join(path.dirname(fileURLToPath(import.meta.url)), "../../scripts/coldseam.mjs");

/** `npm run study -- survival [--kills N] [--seed N]`: a whole ingest killed at many moments, each time looked at and run again.
 *  Returns the exit code. */
export async function runSurvival(kills: number, seed: number): Promise<number> {
  const dir = mkdtempSync(path.join(tmpdir(), "coldseam-survival-"));
  try {
    const yaml = generateStack(tinyCooldown("kv30-killed", seed), path.join(dir, "cooldown"));
    const command = (db: string): string[] => [process.execPath, PROGRAM, "ingest", yaml, "--db", db, "--workers", "1"];
    const whole = path.join(dir, "whole.sqlite");
    const started = performance.now();
    const [program = "", ...args] = command(whole);
    const r = spawnSync(program, args, { encoding: "utf8" });
    if (r.status !== 0) throw new Error(r.stderr);
    const lines = r.stderr.split("\n").filter((l) => / %/.test(l)).length;
    const spreadMs = Math.round((performance.now() - started) / (lines + 1));
    const report = await killIngests(command, dir, spreadMoments(kills, lines, spreadMs, seed), "each");
    process.stdout.write(
      `${report.kills} ingests killed with SIGKILL: ${report.none} left no analysis, ${report.whole} a whole one, ` +
        `${report.late} had ended before; ${report.wrong.length} things wrong after the kill or after running again\n`,
    );
    for (const w of report.wrong) process.stdout.write(`  ${w}\n`);
    return report.wrong.length === 0 ? 0 : 1;
  } finally {
    rmSync(dir, { recursive: true, force: true });
  }
}
