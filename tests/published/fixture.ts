import { readFileSync } from "node:fs";

/** A file of outside values from `fixtures/`; the caller states its shape. */
export function fixture<T>(name: string): T {
  const value: T = JSON.parse(readFileSync(`fixtures/${name}.json`, "utf8"));
  return value;
}
