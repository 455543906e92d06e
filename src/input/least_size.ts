import type { FrameInfo } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import { plainText } from "../model/text.js";

/** Pixels a side: with fewer, the pair search, the noise and the levels have nothing to go by. */
export const LEAST_SIDE_PX = 16;

/** Frames too small to tell anything from; said once, all frames of a cooldown have one size. */
export function sizeProblems(frames: readonly FrameInfo[]): Problem[] {
  const small = frames.find((f) => f.rows < LEAST_SIDE_PX || f.cols < LEAST_SIDE_PX);
  if (small === undefined) return [];
  return [
    {
      at: plainText(small.sources.amplitude.label),
      problem: `images of ${small.cols} × ${small.rows} pixels; at least ${LEAST_SIDE_PX} a side are needed`,
      fix: "give the whole scan, not a part or a preview of it",
    },
  ];
}
