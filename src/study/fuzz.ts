import { fork } from "node:child_process";
import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { fileURLToPath } from "node:url";
import type { FuzzCase } from "./fuzz_child.js";
import { KINDS, type Kind } from "./fuzz_seeds.js";

export interface FuzzReport {
  readonly cases: number;
  readonly byKind: ReadonlyMap<Kind, { readonly errors: number; readonly sound: number }>;
  /** Cases that took longer than is allowed, or took the process with them, or were neither refused in words nor sound. */
  readonly wrong: readonly { readonly k: number; readonly words: string }[];
  readonly slowestMs: number;
  /** Number of the slowest case. */
  readonly slowest: number;
  readonly peakBytes: number;
}

/** Processor time of a case. */
const MOST_MS = 5000;
/** After so long by the clock a process hangs, however busy the machine is; it also loads the libraries and the seeds in that time. */
const PATIENCE_MS = 60_000;
const MOST_BYTES = 1 << 30;

/**
 * Spoils files of sound cooldowns and reads them as `coldseam check` does, in processes of their own: a case that hangs is killed, one
 * that takes more than 5 s of processor time, one that takes more than 1 GiB or the process with it is counted; the next process goes on behind it.
 * @param from number of the first case; a case is the same for the same seed whatever is run beside it
 */
export async function fuzz(from: number, count: number, seed: number): Promise<FuzzReport> {
  const byKind = new Map<Kind, { errors: number; sound: number }>(KINDS.map((k) => [k, { errors: 0, sound: 0 }]));
  const wrong: { k: number; words: string }[] = [];
  let [slowest, slowestMs] = [from, 0];
  let peakBytes = 0;
  const dir = mkdtempSync(path.join(tmpdir(), "coldseam-fuzz-"));
  try {
    let next = from;
    while (next < from + count) {
      next = await inOneProcess(dir, next, from + count, seed, {
        onCase(c) {
          const counts = byKind.get(c.kind);
          if (counts !== undefined && c.outcome === "error") counts.errors++;
          if (counts !== undefined && c.outcome === "sound") counts.sound++;
          if (c.outcome === "wrong") wrong.push({ k: c.k, words: `${c.seed}: ${c.words}` });
          if (c.ms > slowestMs) [slowest, slowestMs] = [c.k, c.ms];
          if (c.ms > MOST_MS) wrong.push({ k: c.k, words: `${c.seed}: ${Math.round(c.ms)} ms of processor time` });
          peakBytes = Math.max(peakBytes, c.peakBytes);
        },
        onWrong: (k, words) => wrong.push({ k, words }),
      });
    }
  } finally {
    rmSync(dir, { recursive: true, force: true });
  }
  return { cases: count, byKind, wrong, slowest, slowestMs, peakBytes };
}

interface Heard {
  onCase(c: FuzzCase): void;
  onWrong(k: number, words: string): void;
}

/** Runs cases until the process ends, by itself or not. Resolves with the case to go on with. */
function inOneProcess(dir: string, from: number, to: number, seed: number, heard: Heard): Promise<number> {
  const entry = path.join(path.dirname(fileURLToPath(import.meta.url)), "fuzz_child.js");
  const script = entry.includes(`${path.sep}src${path.sep}`)
    ? entry.replace(`${path.sep}src${path.sep}`, `${path.sep}dist${path.sep}`)
    : entry;
  return new Promise((resolve, reject) => {
    const child = fork(script, [from, to, seed].map(String), {
      execArgv: ["--max-old-space-size=768"],
      env: { ...process.env, COLDSEAM_FUZZ_DIR: dir },
      stdio: ["ignore", "ignore", "pipe", "ipc"],
    });
    let next = from;
    let ended = false;
    let err = "";
    let hung: NodeJS.Timeout;
    const arm = (): void => {
      clearTimeout(hung);
      hung = setTimeout(() => {
        heard.onWrong(next, `still at it after ${PATIENCE_MS / 1000} s`);
        next++;
        ended = true;
        child.kill("SIGKILL");
      }, PATIENCE_MS);
    };
    arm();
    child.stderr?.on("data", (d: Buffer) => (err = `${err}${d.toString()}`.slice(-2000)));
    child.on("message", (message: FuzzCase | { readonly broken: string; readonly k: number }) => {
      if (ended) return;
      if ("broken" in message) {
        heard.onWrong(message.k, message.broken);
        return;
      }
      heard.onCase(message);
      next = message.k + 1;
      if (message.peakBytes > MOST_BYTES) {
        heard.onWrong(message.k, `${Math.round(message.peakBytes / 2 ** 20)} MiB of memory`);
        ended = true;
        child.kill("SIGKILL");
      }
      arm();
    });
    child.on("error", reject);
    child.on("close", (code, signal) => {
      clearTimeout(hung);
      if (!ended && next < to) {
        heard.onWrong(next, `the process ended, ${signal ?? `code ${String(code)}`}: ${err}`);
        next++;
      }
      resolve(next);
    });
  });
}

/** `npm run study -- fuzz [--count N] [--seed N] [--from K]`. Returns the exit code. */
export async function runFuzz(from: number, count: number, seed: number): Promise<number> {
  const report = await fuzz(from, count, seed);
  const lines = [...report.byKind].map(([kind, n]) => `  ${kind}: ${n.errors} refused in words, ${n.sound} read`);
  process.stdout.write(
    `${report.cases} spoilt cooldowns, seed ${seed}: ${report.wrong.length} wrong; slowest ${report.slowestMs.toFixed(0)} ms (case ${report.slowest}), ` +
      `peak memory ${Math.round(report.peakBytes / 2 ** 20)} MiB\n${lines.join("\n")}\n`,
  );
  for (const w of report.wrong) process.stdout.write(`  case ${w.k}: ${w.words}\n`);
  return report.wrong.length === 0 ? 0 : 1;
}
