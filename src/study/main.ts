import { readFileSync, writeFileSync } from "node:fs";
import { availableParallelism } from "node:os";
import { CONDITIONS, specOf } from "./conditions.js";
import { runOnce } from "./run.js";
import type { Score } from "./score.js";
import { promisedTable } from "./promises.js";
import { studyTables } from "./table.js";

const BEGIN = "<!-- study: begin -->";
const END = "<!-- study: end -->";

/** `npm run study [-- CONDITION …] [--runs N] [--seed N] [--write]`: the accuracy study; `-- survival` kills ingests,
 *  `-- fuzz` reads spoilt files, `-- jumps500` places frames that jump instead. Returns the exit code. */
export async function runStudy(args: readonly string[], guide: string): Promise<number> {
  const option = (name: string, usual: number): number => {
    const at = args.indexOf(name);
    return at < 0 ? usual : Number(args[at + 1]);
  };
  const runs = option("--runs", 4);
  const seed = option("--seed", 1);
  if (args[0] === "survival") {
    const { runSurvival } = await import("./survival.js");
    return runSurvival(option("--kills", 50), seed);
  }
  if (args[0] === "fuzz") {
    const { runFuzz } = await import("./fuzz.js");
    return runFuzz(option("--from", 0), option("--count", 20_000), seed);
  }
  if (args[0] === "jumps500") {
    const { runJumps } = await import("./jumps.js");
    return runJumps(option("--runs", 10), seed);
  }
  const names = args.filter((a, k) => !a.startsWith("--") && !(args[k - 1] ?? "").match(/^--(runs|seed)$/));
  const unknown = names.filter((n) => !CONDITIONS.some((c) => c.name === n));
  if (unknown.length > 0 || !Number.isInteger(runs) || runs < 1 || !Number.isInteger(seed)) {
    process.stderr.write(
      `study: conditions are ${CONDITIONS.map((c) => c.name).join(", ")}; options --runs N --seed N --write\n`,
    );
    return 2;
  }
  const chosen = CONDITIONS.filter((c) => names.length === 0 || names.includes(c.name));
  const results: { condition: (typeof CONDITIONS)[number]; scores: Score[] }[] = [];
  for (const condition of chosen) {
    const scores: Score[] = [];
    for (let run = 0; run < runs; run++) {
      process.stderr.write(`${condition.name} ${run + 1} of ${runs}\n`);
      scores.push(await runOnce(specOf(condition, run, seed), availableParallelism()));
    }
    results.push({ condition, scores });
  }
  const text = [
    `${runs} simulated cooldowns a condition, seed ${seed}: \`npm run study -- --runs ${runs} --seed ${seed}\`.`,
    "",
    ...chosen.map((c) => `- ${c.name}: ${c.what}`),
    "",
    promisedTable(results),
    "",
    studyTables(results),
  ].join("\n");
  process.stdout.write(text);
  if (args.includes("--write")) {
    const before = readFileSync(guide, "utf8");
    const from = before.indexOf(BEGIN);
    const to = before.indexOf(END);
    if (from < 0 || to < from) throw new Error(`${guide} has no ${BEGIN} … ${END}`);
    writeFileSync(guide, `${before.slice(0, from + BEGIN.length)}\n\n${text}\n${before.slice(to)}`);
  }
  return 0;
}
