import type { FrameInfo } from "../../model/cooldown.js";
import type { DriftSettings } from "./settings.js";

interface Approximate {
  readonly xNm: number | null;
  readonly yNm: number | null;
}

/** Which pairs of frames to measure, [reference, moving], reference < moving, each once.
 *  First round (`approx` null): neighbours in order, hops over one and three frames, every frame to the first one, and each frame of a later series to the
 *  frame nearest in temperature of an earlier one. Second round: with the rough positions, for each frame the nearest among partners
 *  spread over the whole cooldown. The number of pairs grows as the number of frames.
 *  @param approx positions from the first round, null (or null numbers) for a frame not placed: it is tried against others once more */
export function choosePairs(
  frames: readonly FrameInfo[],
  approx: readonly (Approximate | null)[] | null,
  s: DriftSettings,
): [number, number][] {
  const pairs = new PairList();
  const n = frames.length;
  if (approx === null) {
    for (let i = 0; i < n; i++) {
      for (const hop of [1, 2, 4]) if (i + hop < n) pairs.add(i, i + hop);
      if (i > 0) pairs.add(0, i);
      const across = nearestInEarlierSeries(frames, i);
      if (across !== null) pairs.add(across, i);
    }
    return pairs.list;
  }
  const perFrame = Math.max(1, Math.round(s.pairsPerFrame) - 5);
  for (let i = 0; i < n; i++) {
    // partners at evenly spread places of the cooldown, a different set for each frame
    const spread = Array.from(
      { length: 3 * perFrame },
      (_, k) => (i + Math.round(((k + 0.5) * n) / (3 * perFrame))) % n,
    );
    const ranked = spread
      .filter((j) => j !== i && !pairs.has(i, j))
      .map((j) => ({ j, apart: distance(approx[i], approx[j]) }))
      .sort((p, q) => p.apart - q.apart || p.j - q.j);
    for (const { j } of ranked.slice(0, perFrame)) pairs.add(i, j);
  }
  return pairs.list;
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
