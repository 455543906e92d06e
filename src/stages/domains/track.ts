import type { Tip } from "../../model/cooldown.js";
import type { DomainRegion, Fate, FrameDomains, Origin, TrackedDomain } from "../../model/domains.js";
import type { Drift } from "../../model/signal.js";
import { quietFlicker, type Flicker } from "./flicker.js";
import { matchStep, type Step } from "./match.js";
import { overlapOf, placedAt } from "./overlap.js";
import type { DomainSettings } from "./settings.js";
import type { FrameSource, PlacedFrame } from "./source.js";

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
  let last: FrameDomains | null = null;
  for (let index = 0; index < source.count; index++) {
    const at = placedAt(drifts[index]);
    if (at === null) continue;
    const now = source.at(index);
    if (now.regions.length === 0) continue;
    if (last !== null) {
      const before = placed[placed.length - 1];
      steps.push(matchStep(before.regions, now.regions, overlapOf(last, now, before.at, at, s)));
    }
    placed.push({ index, frame: now.frame, at, regions: now.regions });
    last = now;
  }
  return histories(placed, steps, quietFlicker(source, placed, steps, tip, s, wallNm));
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

function histories(placed: readonly PlacedFrame[], steps: readonly Step[], flicker: Flicker): TrackedDomain[] {
  const tracks: OpenTrack[] = [];
  let trackOf: (OpenTrack | null)[] = [];
  /** For each frame the tracks that missed the one before it and come back, by the label they come back under. */
  const returning = placed.map(() => new Map<number, OpenTrack>());
  placed.forEach((now, k) => {
    const here: (OpenTrack | null)[] = [null];
    for (const region of now.regions) {
      const { label } = region;
      const step = k === 0 ? null : steps[k - 1];
      const old = step === null ? null : (returning[k].get(label) ?? trackOf[step.predecessor[label]] ?? null);
      let track = old;
      if (track === null && !flicker.dropped[k].has(label)) {
        const origin: Origin = step === null ? "first-frame" : originOf(step, region);
        track = { kind: region.kind, origin, fate: "last-frame", appearances: [] };
        tracks.push(track);
      }
      track?.appearances.push({ frame: now.frame, label });
      here[label] = track;
    }
    if (k < steps.length) {
      for (const region of now.regions) {
        const track = here[region.label];
        if (track === null || steps[k].successor[region.label] !== 0) continue;
        const back = flicker.returns[k].get(region.label);
        if (back === undefined) track.fate = fateOf(steps[k], region);
        else returning[k + 2].set(back, track);
      }
    }
    trackOf = here;
  });
  return tracks.map((t, domain) => ({ domain, ...t }));
}

function originOf(step: Step, region: DomainRegion): Origin {
  if (step.splitFrom[region.label] !== 0) return "split";
  return region.touchesBorder || step.hiddenB[region.label] === 1 ? "border" : "nucleated";
}

function fateOf(step: Step, region: DomainRegion): Fate {
  if (step.mergedInto[region.label] !== 0) return "merged";
  return region.touchesBorder || step.hiddenA[region.label] === 1 ? "border" : "vanished";
}
