import { must, num, word } from "../../figures/rows.js";
import { numberText } from "../../figures/scale.js";
import type { Shown } from "../../figures/paint.js";
import type { Cooldown } from "./cooldown.js";
import type { Frames } from "./frames.js";
import type { Picked, Store } from "./state.js";

/** What every part of the page works with. */
export interface Context {
  readonly store: Store;
  readonly cooldowns: readonly Cooldown[];
  readonly frames: readonly Frames[];
}

export const current = (c: Context): Cooldown => c.cooldowns[c.store.now.cooldown];
export const currentFrames = (c: Context): Frames => c.frames[c.store.now.cooldown];

/** What is shown closely: what was chosen, else what the pointer is over. */
export const picked = (c: Context): Picked | null => c.store.now.pinned ?? c.store.now.pointed;

export const SHOWN: Readonly<Record<Shown, string>> = {
  amplitude: "Amplitude",
  phase: "Phase",
  topography: "Topography",
  states: "States",
};

export const kelvin = (t: number): string => `${Number(t.toFixed(2))} K`;

/** `frame 12, cooling, 155.2 K`. */
export function frameText(c: Cooldown, frame: number): string {
  const r = c.frameRow(frame);
  const cycles = new Set(c.frameRows.map((f) => must(f, "cycle"))).size;
  const cycle = cycles > 1 ? ` ${must(r, "cycle")}` : "";
  return `frame ${frame}, ${word(r, "branch")}${cycle}, ${kelvin(must(r, "temperature_K"))}`;
}

/** `0.431 (0.425 to 0.437)`, or why there is none. */
export function fractionText(c: Cooldown, frame: number): string {
  const r = c.frameRow(frame);
  const v = num(r, "metallic_fraction");
  if (v === null) return `none: ${word(r, "flag") || "undecided"}`;
  return withInterval(v, num(r, "metallic_fraction_low"), num(r, "metallic_fraction_high"), 3);
}

export function withInterval(v: number, low: number | null, high: number | null, digits: number): string {
  const range = low === null || high === null ? "" : ` (${numberText(low, digits)} to ${numberText(high, digits)})`;
  return `${numberText(v, digits)}${range}`;
}

export const withSd = (v: number, sd: number | null, digits: number, unit: string): string =>
  `${numberText(v, digits)}${sd === null ? "" : ` ± ${numberText(sd, digits)}`} ${unit}`;
