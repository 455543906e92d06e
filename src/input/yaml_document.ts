import { isMap, isNode, LineCounter, parseDocument, type Document, type Pair } from "yaml";
import { InputError, type Problem } from "../model/errors.js";
import { countOf } from "../model/text.js";

/** A map of the document, its values not yet checked. */
export const isRecord = (v: unknown): v is Record<string, unknown> => typeof v === "object" && v !== null;

/** A key or an index on the way from the top of a document to a value. */
export type Step = string | number;

/** A parsed YAML file that knows where each of its values stands. */
export interface YamlDocument {
  /** The values as plain data. */
  readonly value: unknown;
  /** `file:line:column` of the value at `path`; of the nearest thing that exists where the value is missing. */
  at(path: readonly Step[]): string;
  /** `file:line:column` of the key `key` in the map at `path`. */
  atKey(path: readonly Step[], key: string): string;
  /** Whether the line of the value at `path` has a comment that asks for it to be filled in, as a draft has. */
  isLeftToFill(path: readonly Step[]): boolean;
}

/** A longer description of one cooldown is not the user's own; it costs memory before it can be checked. */
const MAX_BYTES = 4 * 1024 * 1024;

/** A file that is no YAML at all has a mistake a line. */
const MOST_TOLD = 20;

/**
 * Parses YAML 1.2 with every mistake reported at once: syntax, keys given twice, tags that are not understood, aliases that expand
 * without end. Throws InputError.
 * @param name how the file is called in messages
 */
export function parseYaml(text: string, name: string): YamlDocument {
  if (text.length > MAX_BYTES) {
    throw new InputError({
      at: name,
      problem: `${text.length} characters; a cooldown is described in at most ${MAX_BYTES}`,
      fix: "give the file that describes the cooldown, not an image or a log",
    });
  }
  const lines = new LineCounter();
  const doc = parseDocument(text, { lineCounter: lines, prettyErrors: false, logLevel: "silent" });
  const place = (offset: number): string => {
    const { line, col } = lines.linePos(offset);
    return `${name}:${Math.max(1, line)}:${Math.max(1, col)}`;
  };
  const tabs = doc.errors.filter((e) => e.code === "TAB_AS_INDENT");
  if (tabs.length > 0) {
    // What comes after a tab is read askew: nothing else that is found is a mistake of its own.
    const more = tabs.length > 1 ? ` (and on ${countOf(tabs.length - 1, "more line", "more lines")})` : "";
    throw new InputError({
      at: place(Math.min(...tabs.map((e) => e.pos[0]))),
      problem: `a tab where the line is indented${more}; YAML takes blanks alone`,
      fix: "put blanks in place of the tab",
    });
  }
  const problems: Problem[] = [...doc.errors, ...doc.warnings].map((e) => ({
    at: place(e.pos[0]),
    problem: firstLine(e.message),
    fix: e.code === "DUPLICATE_KEY" ? "keep one of the two" : "mend the YAML at this place",
  }));
  if (problems.length > MOST_TOLD) {
    const more = problems.length - MOST_TOLD;
    problems.length = MOST_TOLD;
    problems.push({ at: name, problem: `and ${countOf(more, "mistake")} more`, fix: "mend the first ones first" });
  }
  if (problems.length > 0) throw new InputError(problems);
  let value: unknown;
  try {
    value = doc.toJS({ maxAliasCount: 100 });
  } catch (e) {
    throw new InputError(
      {
        at: name,
        problem: firstLine(e instanceof Error ? e.message : String(e)),
        fix: "write the values out instead of using aliases",
      },
      e,
    );
  }
  return {
    value,
    at: (path) => place(startOf(doc, path)),
    isLeftToFill(path) {
      const { line } = lines.linePos(startOf(doc, path));
      return /#\s*FILL\b/.test(text.split("\n", line)[line - 1] ?? "");
    },
    atKey(path, key) {
      const map = nodeAt(doc, path);
      const pair = isMap(map) ? map.items.find((p) => String(keyOf(p)) === key) : undefined;
      const start = pair === undefined ? undefined : rangeOf(pair.key);
      return place(start ?? startOf(doc, path));
    },
  };
}

function keyOf(pair: Pair): unknown {
  const key = pair.key;
  return typeof key === "object" && key !== null && "value" in key ? key.value : key;
}

function nodeAt(doc: Document.Parsed, path: readonly Step[]): unknown {
  return path.length === 0 ? doc.contents : doc.getIn(path, true);
}

function rangeOf(node: unknown): number | undefined {
  return isNode(node) ? node.range?.[0] : undefined;
}

function startOf(doc: Document.Parsed, path: readonly Step[]): number {
  for (let n = path.length; n >= 0; n--) {
    const start = rangeOf(nodeAt(doc, path.slice(0, n)));
    if (start !== undefined) return start;
  }
  return 0;
}

const firstLine = (s: string): string => (s.split("\n", 1)[0] ?? s).slice(0, 400);
