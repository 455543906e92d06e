import { simulateCooldown, type CooldownSpec } from "../demo/index.js";
import type { Analysis } from "../model/analysis.js";
import type { FrameDomains, TrackedDomain } from "../model/domains.js";
import { NO_STATE, type DomainMap } from "../model/signal.js";
import type { Settings } from "../settings.js";
import { labelDomains } from "../stages/domains/index.js";
import { unpackMap } from "../workers/measure_task.js";
import { eventsBetween, eventsOf, isAnsweredBy, type DomainEvent, type Shift } from "./domain_events.js";
import { eventTruth, trueMap, type EventTruth } from "./event_truth.js";

/** Births, deaths, splits and merges of large domains: how many there were and were found, how many were told and were right; and how many of
 *  those that were and were told nobody can decide from the images, which are left out of the others. */
export interface EventScore {
  readonly known: number;
  readonly found: number;
  readonly knownUndecidable: number;
  readonly told: number;
  readonly right: number;
  readonly toldUndecidable: number;
}

/** An event this near to the edge of what both frames show is not asked about, px. */
const EDGE_PX = 3;
/** Asked about are domains of at least this many pixels … */
const LEAST_PX = 20;
/** … and areas of the tip's spot. */
const LEAST_SPOTS = 2;

/** One of whose pixels more than this share is hidden in either frame is undecidable: it may live on, or have lived, under what hides it. */
const MOST_HIDDEN = 0.2;

type Filled = "metallic" | "insulating" | null;
const FILLS = ["metallic", "insulating"] as const;

/** Events told by the histories, against those of the noise-free maps of the same fields of view: what the tip sees, divided half-way between
 *  the levels. Debris, scars and rows not measured hide nothing of these maps.
 *
 *  An event is decidable where it happens whatever the pixels in doubt are, in the frame before it and in the frame after it each: those in rows not
 *  measured and in scars, and those whose share is nearer to one half than the noise can tell (`EventTruth.doubt`). One that happens for some
 *  of these four and not for the others is undecidable; a told event that happens for none is wrong. What lies under particles is not in doubt in this
 *  sense: cuts and joins told because of a particle are wrong. */
export function scoreEvents(spec: CooldownSpec, analysis: Analysis, settings: Settings): EventScore {
  const { tip } = analysis.cooldown;
  const seen = analysis.frames.map((f, k) => labelDomains(unpackMap(f.map, spec.pixel), k, tip, settings.domains));
  const { known, told } = judgeEvents(spec, eventTruth(spec), seen, analysis.domains, (map, k) =>
    labelDomains(map, k, tip, settings.domains),
  );
  const count = (list: readonly JudgedEvent[], verdict: JudgedEvent["verdict"]): number =>
    list.filter((e) => e.verdict === verdict).length;
  return {
    known: count(known, "answered") + count(known, "unanswered"),
    found: count(known, "answered"),
    knownUndecidable: count(known, "undecidable"),
    told: count(told, "answered") + count(told, "unanswered"),
    right: count(told, "answered"),
    toldUndecidable: count(told, "undecidable"),
  };
}

export interface JudgedEvent {
  readonly event: DomainEvent;
  readonly verdict: "answered" | "unanswered" | "undecidable";
}

/** Every event asked about, known and told, with what came of it. */
export function judgeEvents(
  spec: CooldownSpec,
  truth: EventTruth,
  seen: readonly FrameDomains[],
  domains: readonly TrackedDomain[],
  label: (map: DomainMap, frame: number) => FrameDomains,
): { readonly known: readonly JudgedEvent[]; readonly told: readonly JudgedEvent[] } {
  const { rows, cols, pixel, tip } = spec;
  const { plan } = simulateCooldown(spec);
  const shifts = plan.map((p): Shift => ({
    rows: Math.round(p.driftYNm / pixel.yNm),
    cols: Math.round(p.driftXNm / pixel.xNm),
  }));
  const spotPx = (Math.PI * (tip.resolutionNm / 2) ** 2) / (pixel.xNm * pixel.yNm);
  const leastPx = Math.max(LEAST_PX, LEAST_SPOTS * spotPx);

  const labelled = new Map<string, FrameDomains>();
  const map = (k: number, filled: Filled): FrameDomains => {
    const key = `${k} ${filled}`;
    const old = labelled.get(key);
    if (old !== undefined) return old;
    const made = label(trueMap(truth, k, seen[k].map, filled), k);
    labelled.set(key, made);
    return made;
  };
  const between = (k: number, before: Filled, now: Filled): DomainEvent[] =>
    eventsBetween(map(k - 1, before), map(k, now), k, leastPx, shifts[k - 1], shifts[k]);
  const actual: DomainEvent[] = [];
  /** By frame, the events for each of the four ways to take what is in doubt. */
  const possible: DomainEvent[][][] = [[]];
  for (let k = 1; k < plan.length; k++) {
    actual.push(...between(k, null, null));
    possible.push(FILLS.flatMap((before) => FILLS.map((now) => between(k, before, now))));
    labelled.delete(`${k - 1} null`);
    for (const fill of FILLS) labelled.delete(`${k - 1} ${fill}`);
  }
  const told = eventsOf(domains, seen, shifts, leastPx);

  const insideOf = (k: number, row: number, col: number): boolean => {
    const i = row - shifts[k].rows;
    const j = col - shifts[k].cols;
    return i >= EDGE_PX && j >= EDGE_PX && i < rows - EDGE_PX && j < cols - EDGE_PX;
  };
  const asked = (e: DomainEvent): boolean =>
    e.large && placesOf(e).every(([row, col]) => insideOf(e.frame, row, col) && insideOf(e.frame - 1, row, col));
  const isHidden = (e: DomainEvent, k: number): boolean => {
    let n = 0;
    for (const [row, col] of placesOf(e)) {
      const p = (row - shifts[k].rows) * cols + col - shifts[k].cols;
      if (truth.hidden[k][p] !== 0 || seen[k].map.states[p] === NO_STATE) n++;
    }
    return n > MOST_HIDDEN * e.pixels.size;
  };
  /** In how many of the four ways it happens. */
  const happens = (e: DomainEvent): number =>
    possible[e.frame].filter((events) => events.some((k) => isAnsweredBy(e, k))).length;
  const judge = (event: DomainEvent, answers: readonly DomainEvent[], isKnown: boolean): JudgedEvent => {
    const ways = happens(event);
    const answered = answers.some((k) => isAnsweredBy(event, k));
    const decidable =
      !isHidden(event, event.frame - 1) &&
      !isHidden(event, event.frame) &&
      (ways === 4 || (ways === 0 && !isKnown && !answered));
    return { event, verdict: !decidable ? "undecidable" : answered ? "answered" : "unanswered" };
  };
  return {
    known: actual.filter(asked).map((e) => judge(e, told, true)),
    told: told.filter(asked).map((e) => judge(e, actual, false)),
  };
}

/** Rows and columns of the reference grid. */
function placesOf(e: DomainEvent): [number, number][] {
  return [...e.pixels].map((key) => [Math.floor(key / 100000) - 1000, (key % 100000) - 1000]);
}
