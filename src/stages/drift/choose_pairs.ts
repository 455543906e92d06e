import type { FrameInfo } from "../../model/cooldown.js";
import type { PixelSize } from "../../model/raster.js";
import type { DriftSettings } from "./settings.js";

interface Approximate {
  readonly xNm: number | null;
  readonly yNm: number | null;
  readonly sdNm?: number | null;
}

/** What the first round says of every frame, in order, and which of its pairs it rejected. */
interface FirstPlaces {
  readonly drifts: readonly Approximate[];
  readonly rejected: readonly (readonly [number, number])[];
}

/** A cooldown of more frames than this is taken in stretches of about as many. */
const STRETCH = 128;
/** No more than one frame in so many ties a stretch to others. */
const LEAST_STEP = 4;

/** Which pairs of frames to measure, [reference, moving], reference < moving, each once.
 *  First round (`approx` null): neighbours in order, hops over one and three frames, every frame to the first one, and each frame of a later series to the
 *  frame nearest in temperature of an earlier one. Second round: with the rough positions, for each frame the nearest among partners
 *  spread over the whole cooldown. The number of pairs grows as the number of frames.
 *
 *  A frame that had a pair with each of 2,000 others would tie all their errors together, and partners all over a long cooldown would leave no part of it
 *  that can be solved before the rest: so above 128 frames it is taken in equal stretches, each frame has its pair with the first one of its
 *  stretch and its partners within it, and the stretches hang together by neighbours and by every so many-th frame, which has its pairs with the
 *  first frame of all and with the one nearest in temperature.
 *  @param approx positions from the first round, null (or null numbers) for a frame not placed: it is tried against others once more
 *  @param enoughNm a frame whose place is known to this standard deviation gets no more partners in the second round; nm */
export function choosePairs(
  frames: readonly FrameInfo[],
  approx: readonly (Approximate | null)[] | null,
  s: DriftSettings,
  enoughNm = 0,
): [number, number][] {
  const pairs = new PairList();
  const n = frames.length;
  const stretches = stretchesOf(n);
  // every so many-th frame of a stretch is tied to other stretches, in all at most as many as a stretch has frames
  const every = stretches.length === 1 ? 1 : Math.max(LEAST_STEP, Math.ceil(n / STRETCH));
  if (approx === null) {
    for (const { from, length } of stretches) {
      for (let i = from; i < from + length; i++) {
        for (const hop of [1, 2, 4]) if (i + hop < n) pairs.add(i, i + hop);
        pairs.add(from, i);
        if ((i - from) % every !== 0) continue;
        pairs.add(0, i);
        const across = nearestInEarlierSeries(frames, i);
        if (across !== null) pairs.add(across, i);
      }
    }
    return pairs.list;
  }
  const perFrame = Math.max(1, Math.round(s.pairsPerFrame) - 5);
  for (const { from, length } of stretches) {
    for (let i = from; i < from + length; i++) {
      const sdNm = approx[i]?.sdNm ?? null;
      if (sdNm !== null && sdNm <= enoughNm) continue;
      // partners at evenly spread places of the stretch, a different set for each frame
      const spread = Array.from(
        { length: 3 * perFrame },
        (_, k) => from + ((i - from + Math.round(((k + 0.5) * length) / (3 * perFrame))) % length),
      );
      const ranked = spread
        .filter((j) => j !== i && !pairs.has(i, j))
        .map((j) => ({ j, apart: distance(approx[i], approx[j]) }))
        .sort((p, q) => p.apart - q.apart || p.j - q.j);
      for (const { j } of ranked.slice(0, perFrame)) pairs.add(i, j);
    }
  }
  return pairs.list;
}

/** The second round: pairs that the first one has not measured, for the frames that it has not placed to `enoughPx`, or whose pairs
 *  contradicted each other, however sure the place looks. */
export function furtherPairs(
  frames: readonly FrameInfo[],
  first: readonly { readonly reference: number; readonly moving: number }[],
  rough: FirstPlaces,
  pixel: PixelSize,
  s: DriftSettings,
): [number, number][] {
  const doubted = new Set(rough.rejected.flat());
  const places = rough.drifts.map((d, k) => (doubted.has(k) ? { ...d, sdNm: null } : d));
  const known = new Set(first.map((p) => `${p.reference} ${p.moving}`));
  return choosePairs(frames, places, s, s.enoughPx * Math.min(pixel.xNm, pixel.yNm)).filter(
    ([a, b]) => !known.has(`${a} ${b}`),
  );
}

function stretchesOf(n: number): { from: number; length: number }[] {
  const count = Math.ceil(n / STRETCH);
  return Array.from({ length: count }, (_, k) => {
    const from = Math.floor((k * n) / count);
    return { from, length: Math.floor(((k + 1) * n) / count) - from };
  });
}

class PairList {
  readonly list: [number, number][] = [];
  private readonly known = new Set<string>();
  add(a: number, b: number): void {
    if (a === b || this.has(a, b)) return;
    this.known.add(PairList.key(a, b));
    this.list.push([Math.min(a, b), Math.max(a, b)]);
  }
  has(a: number, b: number): boolean {
    return this.known.has(PairList.key(a, b));
  }
  private static key(a: number, b: number): string {
    return `${Math.min(a, b)} ${Math.max(a, b)}`;
  }
}

function nearestInEarlierSeries(frames: readonly FrameInfo[], i: number): number | null {
  let best: number | null = null;
  for (let j = 0; j < i; j++) {
    if (frames[j].series === frames[i].series) continue;
    const away = Math.abs(frames[j].temperatureK - frames[i].temperatureK);
    if (best === null || away < Math.abs(frames[best].temperatureK - frames[i].temperatureK)) best = j;
  }
  return best;
}

/** Distance of two frames, nm; 0 where one of them has not been placed, so that it is tried. */
function distance(a: Approximate | null, b: Approximate | null): number {
  if (a === null || b === null || a.xNm === null || a.yNm === null || b.xNm === null || b.yNm === null) return 0;
  return Math.hypot(a.xNm - b.xNm, a.yNm - b.yNm);
}
