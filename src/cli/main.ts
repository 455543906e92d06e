import { Command, CommanderError, Option } from "commander";
import { readFileSync } from "node:fs";
import { InputError } from "../model/errors.js";
import { databaseProblem } from "../store/problem.js";
import type { IngestOptions } from "./ingest.js";
import { sayError } from "./say.js";
import { quiet, usageError } from "./usage.js";

export function programVersion(): string {
  const text = readFileSync(new URL("../../package.json", import.meta.url), "utf8");
  return (JSON.parse(text) as { version: string }).version;
}

const collect = (value: string, before: string[]): string[] => [...before, value];

const db = (): Option => new Option("--db <file>", "the SQLite file").makeOptionMandatory();
const format = (): Option => new Option("--format <format>", "how to print").choices(["text", "json"]).default("text");

/** Which cooldowns and which analysis a command answers from. */
function selecting(c: Command): Command {
  return c
    .addOption(db())
    .option("--cooldown <id...>", "only these cooldowns")
    .option("--sample <name>", "only cooldowns of this sample")
    .option("--analysis <number>", "answer from this analysis instead of the newest of each cooldown");
}

/** Command modules are loaded only when they run: most of the start-up time is loading libraries. */
function build(): Command {
  const program = new Command("coldseam")
    .description(
      "From cryogenic near-field image stacks of an insulator-metal transition to hysteresis loops, wall widths,\nfringes and domain histories, with error bars, in one SQLite file. The program only analyses.",
    )
    .version(programVersion())
    .option("--verbose", "on an error, also print where in the program it arose")
    .showSuggestionAfterError()
    .exitOverride();

  program
    .command("check")
    .description("read everything a cooldown.yaml names, say what was found and what is wrong; write nothing")
    .argument("<yaml...>", "the cooldown's description; several files that describe parts of one cooldown are joined")
    .option("--allow-outside", "allow image files outside the folder of the YAML file")
    .action(async (yaml: string[], o: object) => (await import("./check.js")).check(yaml, o));

  program
    .command("draft")
    .description("write a cooldown.yaml for a folder of images from their names, with what is left to fill in marked")
    .argument("<folder>", "the folder of one cooldown's images")
    .action(async (folder: string) => (await import("./draft.js")).draft(folder));

  program
    .command("ingest")
    .description("analyse a cooldown and store the result; the same work is recognised and not done twice")
    .argument("<yaml...>", "the cooldown's description; several files that describe parts of one cooldown are joined")
    .addOption(db())
    .option("--workers <n>", "worker threads (default: the cores; 0: none)")
    .option("--set <name=value>", "change a setting; may be repeated", collect, [])
    .option("--allow-outside", "allow image files outside the folder of the YAML file")
    .option("--no-cache", "keep nothing of the stages for the next ingest, and use nothing that was kept")
    .option("--cache-mb <n>", "most that the cache beside the database may hold, MB (default: 2000)")
    .option("--watch", "while the run goes on: take in each new frame as it comes, and show the loop so far")
    .option("--until <n>", "with --watch: end when so many frames are taken in (default: Ctrl-C ends it)")
    .option("--every <s>", "with --watch: seconds from one look at the files to the next (default: 2)")
    .action(async (yaml: string[], o: IngestOptions) =>
      o.watch === true || o.until !== undefined || o.every !== undefined
        ? (await import("./watch.js")).watch(yaml, o)
        : void (await (await import("./ingest.js")).ingest(yaml, o)),
    );

  program
    .command("cache")
    .description("how large the cache beside a database is; it may be deleted at any time")
    .addOption(db())
    .option("--clear", "delete it")
    .action(async (o: object) => (await import("./cache.js")).cache(o as never));

  program
    .command("cooldowns")
    .description("what is in a database: samples, regions, frames, temperatures, analyses")
    .addOption(db())
    .addOption(format())
    .action(async (o: object) => (await import("./cooldowns.js")).cooldowns(o as never));

  selecting(program.command("loops"))
    .description("half temperatures, loop width and area with 95 % intervals, and a plot of each loop")
    .addOption(format())
    .action(async (o: object) => (await import("./loops.js")).loops(o as never));

  selecting(program.command("walls"))
    .description("wall widths by temperature and branch, limits treated as limits")
    .addOption(format())
    .action(async (o: object) => (await import("./walls.js")).walls(o as never));

  selecting(program.command("export"))
    .description("write a table: temperature, walls, fringes, domains, domain-frames or loops")
    .argument("<table>", "name of the table")
    .addOption(new Option("--format <format>", "file format").choices(["csv", "tsv", "json"]).default("csv"))
    .option("--out <file>", "write here instead of standard output")
    .action(async (table: string, o: object) => (await import("./export.js")).exportTable(table, o as never));

  selecting(program.command("figure"))
    .description("draw a figure of what is stored: loop, frames, widths, wall, fringe, drift, domains or orbit")
    .argument("<kind>", "what to draw")
    .requiredOption("--out <file>", "an .svg (text stays text) or a .png")
    .option("--frame <n...>", "only these frames; for wall, fringe and orbit the frame to look into")
    .option("--wall <n>", "for wall, fringe and orbit: the wall; what is not named is chosen")
    .option("--profile <n>", "for wall: the profile along it")
    .option("--stretch <n>", "for fringe and orbit: the stretch along it")
    .addOption(
      new Option("--channel <channel>", "for frames: what to show (default: amplitude)").choices([
        "amplitude",
        "phase",
        "topography",
        "states",
      ]),
    )
    .option("--width-mm <mm>", "width of the figure", "86")
    .option("--dpi <n>", "dots an inch of a .png", "300")
    .addOption(
      new Option("--style <style>", "dark on light, or light on dark").choices(["paper", "screen"]).default("paper"),
    )
    .option("--data <file>", "also write the figure's numbers, as CSV")
    .action(async (kind: string, o: object) => (await import("./figure.js")).figure(kind, o as never));

  selecting(program.command("report"))
    .description("write one page, a file of its own, on which to look through the cooldowns")
    .requiredOption("--out <file>", "an .html; opens in any browser, without a network")
    .action(async (o: object) => void (await (await import("./report.js")).report(o as never)));

  program
    .command("verify")
    .description("check a database from outside: its file, its schema, and what its numbers owe each other")
    .addOption(db())
    .option("--sources", "also read the source files and compare their SHA-256")
    .option("--folder <dir>", "where the cooldowns' folders are now, if they were moved")
    .action(async (o: object) => (await import("./verify.js")).verify(o as never));

  program
    .command("forget")
    .description("remove one cooldown, or one of its analyses, after asking; the images are not touched")
    .argument("<cooldown>", "name of the cooldown")
    .addOption(db())
    .option("--analysis <number>", "only this analysis")
    .option("--yes", "do not ask")
    .action(async (name: string, o: object) => (await import("./forget.js")).forget(name, o as never));

  program
    .command("merge")
    .description("bring several databases together in one; all or nothing, and the same work is kept once")
    .argument("<files...>", "the databases to take from; they are only read")
    .requiredOption("--into <file>", "the database to bring them together in; made where there is none")
    .action(async (files: string[], o: object) => (await import("./merge.js")).merge(files, o as never));

  program
    .command("tip")
    .description("measure the tip's resolution on a line over a sharp edge or a small particle, or propose lines")
    .argument("<yaml>", "the cooldown's description")
    .requiredOption("--frame <n>", "frame of the cooldown, from 0")
    .addOption(
      new Option("--channel <channel>", "default: complex where there is a phase, else amplitude").choices([
        "amplitude",
        "phase",
        "topography",
        "complex",
      ]),
    )
    .option("--from <x,y>", "start of the line, nm of the frame (column × pixel_x, row × pixel_y; no drift)")
    .option("--to <x,y>", "end of the line, beyond the feature")
    .option("--width <nm>", "use pixels up to half of this from the line (default: twice the stated resolution)")
    .addOption(new Option("--model <model>", "only this kind of feature").choices(["edge", "particle"]))
    .option("--size <nm>", "the particle's own diameter or width, where it is known")
    .option("--find", "propose the sharpest features of the frame instead")
    .option("--count <n>", "how many to propose", "10")
    .option("--raw", "take the pixels as they are in the file: rows not aligned, scars not left out")
    .option("--allow-outside", "allow image files outside the folder of the YAML file")
    .addOption(format())
    .action(async (yaml: string, o: object) => (await import("./tip.js")).tip(yaml, o as never));

  program
    .command("settings")
    .description("every setting: name, default, unit, meaning")
    .addOption(format())
    .action(async (o: object) => (await import("./settings_list.js")).settingsList(o as never));

  program
    .command("demo")
    .description("write the invented demo cooldowns, with their truth, as files")
    .argument("<dir>", "folder to make")
    .option("--seed <n>", "seed of the invented sample")
    .addOption(new Option("--size <size>", "small is quick to make").choices(["full", "small"]).default("full"))
    .action(async (dir: string, o: object) => void (await import("./demo.js")).demo(dir, o as never));

  return program;
}

/** The database that the command line names, for messages. */
function databaseOf(argv: readonly string[]): string {
  const at = argv.findIndex((a) => a === "--db" || a === "--into");
  return argv[at + 1] ?? "the database";
}

/** Runs the command line and sets the exit code: 0 done, 1 the input or the data stopped it, 2 the command line was wrong. */
export async function main(argv: readonly string[]): Promise<void> {
  // A closed pipe (`coldseam export … | head`) is the reader's choice, not an error.
  process.stdout.on("error", (e: NodeJS.ErrnoException) => {
    if (e.code === "EPIPE") process.exit(0);
    const full = e.code === "ENOSPC" || e.code === "EDQUOT";
    const problem = `cannot be written: ${full ? "no space left on its disk" : e.message}`;
    const fix = full ? "free some space, or send it to another disk" : "send it elsewhere, or name a file with --out";
    process.exit(sayError(new InputError({ at: "the output", problem, fix }, e), false));
  });
  const program = build();
  quiet(program);
  try {
    await program.parseAsync([...argv]);
  } catch (e) {
    if (e instanceof CommanderError) {
      const wrong = usageError(e, argv, program);
      process.exitCode = wrong === null ? (e.exitCode === 0 ? 0 : 2) : sayError(wrong, false);
    } else process.exitCode = sayError(databaseProblem(databaseOf(argv), e) ?? e, argv.includes("--verbose"));
  }
}
