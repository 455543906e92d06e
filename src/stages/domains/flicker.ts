import type { Tip } from "../../model/cooldown.js";
import type { FrameDomains } from "../../model/domains.js";
import { leastDomainPixels } from "./label.js";
import type { Step } from "./match.js";
import { gapIsNarrow, neckIsNarrow } from "./neck.js";
import { overlapOf, type PairOverlap } from "./overlap.js";
import type { DomainSettings } from "./settings.js";
import type { FrameSource, PlacedFrame } from "./source.js";
import type { Unseen } from "./unseen.js";

/** What lasts one frame and is noise. */
export interface Flicker {
  /** Per frame: label → its label two frames on, absent in between. */
  readonly returns: readonly ReadonlyMap<number, number>[];
  /** Per frame: labels of pieces that belong to no history. */
  readonly dropped: readonly ReadonlySet<number>[];
}

/** A domain may be missing for one frame if it is smaller than this many least areas: it fell below the least one. */
const SMALL_LEAST_AREAS = 1.5;

/** Finds cuts and joins of a single frame at a narrow place, and small domains missing for a single frame, and
 *  mends the steps (changed in place) so that identity passes over them. */
export function quietFlicker(
  source: FrameSource,
  placed: readonly PlacedFrame[],
  steps: readonly Step[],
  unseen: readonly Unseen[],
  tip: Tip | null,
  s: DomainSettings,
  wallNm: number,
): Flicker {
  const returns = placed.map(() => new Map<number, number>());
  const dropped = placed.map(() => new Set<number>());
  for (let q = 1; q + 1 < placed.length; q++) {
    const into = steps[q - 1];
    const out = steps[q];
    const skip = skippedPair(source, placed, q, s);
    const neckNm = (): number => neckOf(skip.now(), tip, s, wallNm);

    for (const { label: piece } of placed[q].regions) {
      const parent = into.splitFrom[piece];
      const sister = parent === 0 ? 0 : into.successor[parent];
      if (sister === 0) continue;
      const rejoined =
        out.mergedInto[piece] !== 0 && out.mergedInto[piece] === out.successor[sister]
          ? out.mergedInto[piece]
          : out.successor[piece] !== 0 && out.successor[piece] === out.mergedInto[sister]
            ? out.successor[piece]
            : 0;
      if (rejoined === 0) continue;
      if (unseen[q - 1].cut[piece] === 0 && !gapIsNarrow(skip.now(), piece, sister, neckNm())) continue;
      out.successor[piece] = 0;
      out.mergedInto[piece] = rejoined;
      out.successor[sister] = rejoined;
      out.mergedInto[sister] = 0;
      out.predecessor[rejoined] = sister;
      dropped[q].add(piece);
    }

    for (const { label: lost } of placed[q - 1].regions) {
      const joint = into.mergedInto[lost];
      const winner = joint === 0 ? 0 : into.predecessor[joint];
      if (winner === 0 || out.successor[joint] === 0) continue;
      const parts = [out.successor[joint]];
      for (const r of placed[q + 1].regions) if (out.splitFrom[r.label] === joint) parts.push(r.label);
      if (parts.length < 2) continue;
      const lostNow = bestPartner(skip.pair(), lost, parts);
      const winnerNow = bestPartner(skip.pair(), winner, parts);
      if (lostNow === 0 || winnerNow === 0 || lostNow === winnerNow) continue;
      if ([...returns[q - 1].values()].includes(lostNow)) continue;
      const { before, now } = { before: skip.before(), now: skip.now() };
      if (!neckIsNarrow(now, joint, before, lost, winner, placed[q].at, placed[q - 1].at, neckNm())) continue;
      for (const part of parts) {
        out.predecessor[part] = part === winnerNow ? joint : 0;
        out.splitFrom[part] = part === winnerNow ? 0 : joint;
      }
      out.successor[joint] = winnerNow;
      returns[q - 1].set(lost, lostNow);
    }

    for (const { label: gone, areaNm2 } of placed[q - 1].regions) {
      if (into.successor[gone] !== 0 || into.mergedInto[gone] !== 0) continue;
      const { map } = skip.now();
      const small = SMALL_LEAST_AREAS * leastDomainPixels(map, tip, s) * map.pixel.xNm * map.pixel.yNm;
      if (areaNm2 > small) continue;
      const found = skip.pair().links.filter((l) => l.a === gone);
      if (found.length !== 1) continue;
      const back = found[0].b;
      if (out.predecessor[back] !== 0 || out.splitFrom[back] !== 0) continue;
      if (placed[q + 1].regions[back - 1].areaNm2 > small) continue;
      if ([...returns[q - 1].values()].includes(back)) continue;
      returns[q - 1].set(gone, back);
    }
  }
  return { returns, dropped };
}

function neckOf(f: FrameDomains, tip: Tip | null, s: DomainSettings, wallNm: number): number {
  if (s.neckNm > 0) return s.neckNm;
  return Math.max(wallNm, tip?.resolutionNm ?? 3 * Math.max(f.map.pixel.xNm, f.map.pixel.yNm));
}

/** The frame `q`, the one before it, and the overlap of its two neighbours, each worked out only when asked for. */
function skippedPair(source: FrameSource, placed: readonly PlacedFrame[], q: number, s: DomainSettings) {
  let before: FrameDomains | null = null;
  let now: FrameDomains | null = null;
  let pair: PairOverlap | null = null;
  const getBefore = (): FrameDomains => (before ??= source.at(placed[q - 1].index));
  return {
    before: getBefore,
    now: (): FrameDomains => (now ??= source.at(placed[q].index)),
    pair: (): PairOverlap =>
      (pair ??= overlapOf(getBefore(), source.at(placed[q + 1].index), placed[q - 1].at, placed[q + 1].at, s)),
  };
}

function bestPartner(pair: PairOverlap, a: number, among: readonly number[]): number {
  let best = 0;
  let most = 0;
  for (const l of pair.links) {
    if (l.a !== a || l.pixels <= most || !among.includes(l.b)) continue;
    best = l.b;
    most = l.pixels;
  }
  return best;
}
