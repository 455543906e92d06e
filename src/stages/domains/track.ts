import type { Tip } from "../../model/cooldown.js";
import type { DomainRegion, Fate, FrameDomains, Origin, TrackedDomain } from "../../model/domains.js";
import type { Drift } from "../../model/signal.js";
import { quietFlicker, type Flicker } from "./flicker.js";
import { matchStep, type Step } from "./match.js";
import { overlapOf, placedAt } from "./overlap.js";
import type { DomainSettings } from "./settings.js";
import type { FrameSource, PlacedFrame } from "./source.js";
import { seenApart, unseenChanges, type Unseen } from "./unseen.js";

/** Histories of the domains of both states through all frames of a cooldown, both branches in the order of the frames.
 *
 *  Frames are laid on each other by their drift. A frame without drift, or without a single domain (nothing measured, or its state undecided), takes
 *  no part: the histories go on from the frame before it to the one after it, and its domains belong to none.
 *  `first-frame` and `last-frame` are those of the first and last frame that take part. A domain that appears is `nucleated`
 *  only where it lies inside the field common with the frame before and does not touch the border, otherwise it came over
 *  the `border`; `vanished` likewise. The largest of merging domains lives on as the merged one, the largest piece
 *  of a split one as the old one. Joins and cuts that last a single frame and are narrower than the tip are not taken for events:
 *  a domain so joined has no appearance in that frame, a piece so cut off is no domain of its own.
 *  @param frames labelled frames in order (an array, or a source that loads them on demand)
 *  @param drifts one a frame, same order
 *  @param tip    a neck is narrow below its resolution; null: 3 pixels
 *  @param wallNm width of the walls as seen, nm: where two of them meet nothing reaches the level of its state, and noise says on which side of
 *         one half a neck lies. A neck is narrow below that as well */
export function trackDomains(
  frames: readonly FrameDomains[] | FrameSource,
  drifts: readonly Drift[],
  s: DomainSettings,
  tip: Tip | null = null,
  wallNm = 0,
): TrackedDomain[] {
  const source: FrameSource = "at" in frames && "count" in frames ? frames : fromArray(frames);
  const placed: PlacedFrame[] = [];
  const steps: Step[] = [];
  const unseen: Unseen[] = [];
  let last: FrameDomains | null = null;
  for (let index = 0; index < source.count; index++) {
    const at = placedAt(drifts[index]);
    if (at === null) continue;
    const now = source.at(index);
    if (now.regions.length === 0) continue;
    if (last !== null) {
      const before = placed[placed.length - 1];
      const step = matchStep(before.regions, now.regions, overlapOf(last, now, before.at, at, s));
      steps.push(step);
      unseen.push(unseenChanges(last, now, before.at, at, step));
    }
    placed.push({ index, frame: now.frame, at, regions: now.regions });
    last = now;
  }
  return histories(source, placed, steps, unseen, quietFlicker(source, placed, steps, unseen, tip, s, wallNm));
}

function fromArray(frames: readonly FrameDomains[]): FrameSource {
  return { count: frames.length, at: (index) => frames[index] };
}

interface OpenTrack {
  kind: DomainRegion["kind"];
  origin: Origin;
  fate: Fate;
  appearances: { frame: number; label: number }[];
}

function histories(
  source: FrameSource,
  placed: readonly PlacedFrame[],
  steps: readonly Step[],
  unseen: readonly Unseen[],
  flicker: Flicker,
): TrackedDomain[] {
  const tracks: OpenTrack[] = [];
  let trackOf: (OpenTrack | null)[] = [];
  /** For each frame the tracks that missed the one before it and come back, by the label they come back under. */
  const returning = placed.map(() => new Map<number, OpenTrack>());
  const labelIn = (track: OpenTrack | null, k: number): number =>
    track?.appearances.find((a) => a.frame === placed[k].frame)?.label ?? 0;

  /** A cut between frames k − 1 and k that was hidden, of pieces seen apart in frame k + 1, has happened all the same: in either step. */
  const isSplit = (k: number, label: number): boolean => {
    const whole = steps[k - 1].splitFrom[label];
    if (unseen[k - 1].cut[label] === 0) return true;
    if (k >= steps.length) return false;
    const p = steps[k].successor[label];
    const q = steps[k].successor[steps[k - 1].successor[whole]];
    if (p === 0 || q === 0 || p === q) return false;
    const [of, other] = [placed[k + 1], placed[k - 1]];
    return seenApart(source.at(of.index), p, q, source.at(other.index), whole, of.at, other.at);
  };
  /** A join between frames k and k + 1 of domains that nothing seen divides in frame k, but did in frame k − 1, likewise. */
  const isMerger = (k: number, label: number): boolean => {
    const whole = steps[k].mergedInto[label];
    if (unseen[k].join[label] === 0) return true;
    if (k === 0) return false;
    const p = labelIn(trackOf[label], k - 1);
    const q = labelIn(trackOf[steps[k].predecessor[whole]], k - 1);
    if (p === 0 || q === 0 || p === q) return false;
    const [of, other] = [placed[k - 1], placed[k + 1]];
    return seenApart(source.at(of.index), p, q, source.at(other.index), whole, of.at, other.at);
  };
  const originOf = (k: number, { label, touchesBorder }: DomainRegion): Origin => {
    if (k === 0) return "first-frame";
    if (steps[k - 1].splitFrom[label] !== 0) return isSplit(k, label) ? "split" : "border";
    return touchesBorder || steps[k - 1].hiddenB[label] === 1 ? "border" : "nucleated";
  };
  const fateOf = (k: number, { label, touchesBorder }: DomainRegion): Fate => {
    if (steps[k].mergedInto[label] !== 0) return isMerger(k, label) ? "merged" : "border";
    return touchesBorder || steps[k].hiddenA[label] === 1 ? "border" : "vanished";
  };

  placed.forEach((now, k) => {
    const here: (OpenTrack | null)[] = [null];
    for (const region of now.regions) {
      const { label } = region;
      let track = k === 0 ? null : (returning[k].get(label) ?? trackOf[steps[k - 1].predecessor[label]] ?? null);
      if (track === null && !flicker.dropped[k].has(label)) {
        track = { kind: region.kind, origin: originOf(k, region), fate: "last-frame", appearances: [] };
        tracks.push(track);
      }
      track?.appearances.push({ frame: now.frame, label });
      here[label] = track;
    }
    trackOf = here;
    if (k === steps.length) return;
    for (const region of now.regions) {
      const track = here[region.label];
      if (track === null || steps[k].successor[region.label] !== 0) continue;
      const back = flicker.returns[k].get(region.label);
      if (back === undefined) track.fate = fateOf(k, region);
      else returning[k + 2].set(back, track);
    }
  });
  return tracks.map((t, domain) => ({ domain, ...t }));
}
