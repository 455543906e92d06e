import type * as z from "zod";
import type { Problem } from "../model/errors.js";
import { closestWord, plainText } from "../model/text.js";
import { keyWords } from "./schema.js";
import { isRecord, type Step, type YamlDocument } from "./yaml_document.js";

/**
 * What the schema found, as problems with line and column, in words that say what was found and what to write. A key that is
 * missing because it is misspelt is told once.
 */
export function schemaProblems(issues: readonly z.core.$ZodIssue[], doc: YamlDocument): Problem[] {
  const steps = (path: readonly PropertyKey[]): Step[] => path.map((s) => (typeof s === "number" ? s : String(s)));
  const meant = new Set<string>();
  const unknown = issues.flatMap((issue) => {
    if (issue.code !== "unrecognized_keys") return [];
    const path = steps(issue.path);
    return issue.keys.map((key) => {
      const known = keysBelow(path);
      const likely = closestWord(key, known);
      if (likely !== null) meant.add(pathText([...path, likely]));
      const where = path.length === 0 ? "" : ` in ${pathText(path)}`;
      return {
        at: doc.atKey(path, key),
        problem: `no key "${plainText(key)}"${where}${likely === null ? "" : `; did you mean "${likely}"?`}`,
        fix: `the keys here are ${known.join(", ")}`,
      };
    });
  });
  const wrong = issues.flatMap((issue) => {
    const path = steps(issue.path);
    if (issue.code === "unrecognized_keys") return [];
    const value = valueAt(doc.value, path);
    return value === undefined && meant.has(pathText(path)) ? [] : [wrongValue(path, value, doc)];
  });
  return [...wrong, ...unknown];
}

/** A value that is missing or wrong, in words. */
export function wrongValue(path: readonly Step[], value: unknown, doc: YamlDocument): Problem {
  const words = keyWords[pattern(path)];
  const name = path.length === 0 ? "the file" : pathText(path);
  const fix = words?.fix ?? "see the description of cooldown.yaml in the README";
  if ((value === null || value === undefined) && doc.isLeftToFill(path)) {
    return { at: doc.at(path), problem: `${name} is left to fill in; expected ${words?.expected ?? "a value"}`, fix };
  }
  return {
    at: doc.at(path),
    problem: `${name} is ${foundText(value)}; expected ${words?.expected ?? "a map with sample, cooldown, scan and series"}`,
    fix: (value === undefined ? words?.add : Number.isFinite(value) ? undefined : words?.number) ?? fix,
  };
}

/** Whether the map at `path` has a key that does not exist and that `key` was probably meant by. */
export function isMisspelt(doc: YamlDocument, path: readonly Step[], key: string): boolean {
  const map = valueAt(doc.value, path);
  const known = keysBelow(path);
  return isRecord(map) && Object.keys(map).some((k) => !known.includes(k) && closestWord(k, known) === key);
}

/** `series[0].temperatures_K[2]` */
export function pathText(path: readonly Step[]): string {
  return plainText(path.map((s, i) => (typeof s === "number" ? `[${s}]` : i === 0 ? s : `.${s}`)).join(""));
}

const pattern = (path: readonly Step[]): string =>
  path.map((s, i) => (typeof s === "number" ? "[]" : i === 0 ? s : `.${s}`)).join("");

function keysBelow(path: readonly Step[]): string[] {
  const prefix = path.length === 0 ? "" : `${pattern(path)}.`;
  return Object.keys(keyWords)
    .filter((k) => k.startsWith(prefix))
    .map((k) => k.slice(prefix.length))
    .filter((k) => k !== "" && !/[.[]/.test(k));
}

function valueAt(value: unknown, path: readonly Step[]): unknown {
  let v = value;
  for (const s of path) {
    if (!isRecord(v)) return undefined;
    v = v[String(s)];
  }
  return v;
}

/** A value from the user's file in a few words. */
export function foundText(value: unknown): string {
  if (value === undefined) return "missing";
  if (value === null) return "empty";
  if (typeof value === "number") return String(value);
  if (typeof value === "string") return `"${plainText(value.length > 60 ? `${value.slice(0, 57)}…` : value)}"`;
  if (typeof value === "boolean") return String(value);
  if (Array.isArray(value)) return value.length === 0 ? "an empty list" : `a list of ${value.length}`;
  if (value instanceof Date) return "a date";
  return "a map";
}
