import type { Shown } from "../../figures/paint.js";
import type { ExclusionData } from "../data.js";

export interface Point {
  readonly xNm: number;
  readonly yNm: number;
}

/** What is looked at closely. Positions along walls are profiles. */
export type Picked =
  | { readonly kind: "profile"; readonly frame: number; readonly wall: number; readonly profile: number }
  | { readonly kind: "domain"; readonly domain: number };

export type Compare = "off" | "split" | "outlines";
export type Tool = "look" | "measure" | "mark";

/** Part of the cooldown's coordinates that the map shows: its middle, and nm of a CSS pixel. */
export interface MapView {
  readonly xNm: number;
  readonly yNm: number;
  readonly nmPerPx: number;
}

/** Everything that the page shows; there is no other state. */
export interface State {
  readonly cooldown: number;
  readonly frame: number;
  readonly base: Shown;
  /** Laid over the base, with this much of it. */
  readonly over: Shown | "none";
  readonly mix: number;
  readonly walls: boolean;
  readonly compare: Compare;
  /** Where the split lies, share of the map's width. */
  readonly split: number;
  readonly tool: Tool;
  /** What a click or a key chose; it stays. */
  readonly pinned: Picked | null;
  /** What the pointer is over; it goes. */
  readonly pointed: Picked | null;
  /** Where the pointer, or the cross of the keyboard, reads the map. */
  readonly at: Point | null;
  readonly line: readonly [Point, Point] | null;
  readonly region: readonly [Point, Point] | null;
  /** null: the whole field. */
  readonly view: MapView | null;
  /** Loops of the other cooldowns drawn too. */
  readonly allLoops: boolean;
  /** Marked on this page and not yet in any cooldown.yaml. */
  readonly corrections: readonly Correction[];
  /** The reason that is being written. */
  readonly reason: string;
}

export interface Correction extends ExclusionData {
  readonly cooldown: number;
}

type Listener = (now: State, before: State) => void;

export class Store {
  private readonly listeners: Listener[] = [];

  constructor(private state: State) {}

  get now(): State {
    return this.state;
  }

  set(change: Partial<State>): void {
    const before = this.state;
    if (Object.entries(change).every(([k, v]) => before[k as keyof State] === v)) return;
    this.state = { ...before, ...change };
    for (const l of this.listeners) l(this.state, before);
  }

  /** Calls at every change of one of the keys, and once now. */
  on(keys: readonly (keyof State)[], listener: (now: State) => void): void {
    this.listeners.push((now, before) => {
      if (keys.some((k) => now[k] !== before[k])) listener(now);
    });
    listener(this.state);
  }
}

export const samePick = (a: Picked | null, b: Picked | null): boolean => JSON.stringify(a) === JSON.stringify(b);

/** Of two places the first alone is set: the second stands on it still. */
export const isPoint = ([a, b]: readonly [Point, Point]): boolean => a.xNm === b.xNm && a.yNm === b.yNm;
