import type { Command, CommanderError } from "commander";
import { UsageError } from "../model/errors.js";
import { closestWord, countOf } from "../model/text.js";

/** Keeps commander from printing its errors itself: they are told in our own shape by whoever catches them. */
export function quiet(program: Command): void {
  program.configureOutput({ outputError: () => undefined });
  for (const c of program.commands) quiet(c);
}

/** What commander found wrong with the command line, in our words and with what to do; null where it only showed help or the version. */
export function usageError(e: CommanderError, argv: readonly string[], program: Command): UsageError | null {
  if (e.exitCode === 0 || e.code === "commander.help") return null;
  const command = program.commands.find((c) => argv.slice(2).includes(c.name()));
  const help = `\`coldseam ${command === undefined ? "" : `${command.name()} `}--help\``;
  // "error: unknown option '--dbb'\n(Did you mean --db?)"
  const [first = "", ...rest] = e.message.replace(/^error: /, "").split("\n");
  const meant = /\(Did you mean (?:one of )?(.+?)\?\)/.exec(rest.join(" "))?.[1];
  const likely = meant === undefined ? "" : `; did you mean ${meant}?`;
  const named = /'([^']*)'/.exec(first)?.[1] ?? "";
  const flag = named.split(" ")[0];
  switch (e.code) {
    case "commander.missingMandatoryOptionValue": {
      const slip = strays(argv, command).find((a) => closestWord(a, [flag]) !== null);
      return slip === undefined
        ? new UsageError(`${flag} is missing`, `add \`${filled(named)}\``)
        : new UsageError(`no option ${slip}; did you mean ${flag}?`, `${help} lists the options`);
    }
    case "commander.optionMissingArgument":
      return new UsageError(`${flag} has no value behind it`, `write \`${filled(named)}\``);
    case "commander.missingArgument":
      return new UsageError(
        `${command === undefined ? "" : `${command.name()}: `}no <${named}> given`,
        `${help} shows how it is called`,
      );
    case "commander.unknownOption":
      return new UsageError(`no option ${named}${likely}`, `${help} lists the options`);
    case "commander.unknownCommand":
      return new UsageError(`no command "${named}"${likely}`, "`coldseam --help` lists the commands");
    case "commander.excessArguments": {
      const [, wanted = "", got = ""] = /Expected (\d+).* but got (\d+)/.exec(first) ?? [];
      const words = `${command === undefined ? "coldseam" : command.name()} takes ${countOf(Number(wanted), "word")} besides its options, not ${got}`;
      return new UsageError(words, `put a name with blanks in quotes; ${help} shows how it is called`);
    }
    case "commander.invalidArgument": {
      const [, option = "", value = "", allowed] =
        /option '([^']*)' argument '([^']*)' is invalid\.(?: Allowed choices are (.+?)\.)?/.exec(first) ?? [];
      if (option !== "")
        return new UsageError(
          `${option.split(" ")[0]} ${value}: no such choice`,
          allowed === undefined ? `${help} says what it may be` : `it is one of ${allowed}`,
        );
      return new UsageError(first, `${help} shows how it is called`);
    }
    default:
      return new UsageError(first, `${help} shows how it is called`);
  }
}

/** `--db <file>` as `--db FILE`. */
const filled = (option: string): string => option.replace(/<(.+?)>/, (_, v: string) => v.toUpperCase());

/** Options on the command line that the command does not have. */
function strays(argv: readonly string[], command: Command | undefined): string[] {
  const known = new Set(command?.options.map((o) => o.long));
  return argv
    .filter((a) => a.startsWith("--") && a.length > 2)
    .map((a) => a.split("=")[0])
    .filter((a) => !known.has(a));
}
