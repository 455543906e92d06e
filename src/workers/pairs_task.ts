import type { Settings } from "../settings.js";
import { measurePair, type DriftImage, type PairShift } from "../stages/drift/index.js";
import { cached } from "./cached.js";
import { driftImageOf, type FrameSource, type Run } from "./clean_task.js";

export interface PairsInput extends Run {
  /** The moving frame of all these pairs. */
  readonly frame: number;
  readonly source: FrameSource;
  readonly against: readonly {
    readonly source: FrameSource;
    readonly predicted: { readonly xNm: number; readonly yNm: number } | null;
  }[];
  readonly settings: Pick<Settings, "drift">;
}

/** The registration images used last stay in memory with what was computed from them: neighbouring frames share their partners. */
const images = new Map<string, DriftImage>();
const IMAGES_KEPT = 10;

async function image(run: Run, source: FrameSource, settings: Pick<Settings, "drift">): Promise<DriftImage> {
  const key = `${run.scratch}/${source.info.frame}`;
  const found = images.get(key) ?? (await driftImageOf(run, source, settings));
  // the one used last stands last
  images.delete(key);
  if (images.size >= IMAGES_KEPT) images.delete(images.keys().next().value as string);
  images.set(key, found);
  return found;
}

/** Frees them, for the stages that follow. */
export const forgetImages = (): void => images.clear();

/** Shifts of one frame against several. */
export async function pairs(input: PairsInput): Promise<PairShift[]> {
  const { source, against, settings } = input;
  const of = {
    moving: source.key,
    against: against.map((a) => ({ reference: a.source.key, predicted: a.predicted })),
    settings,
  };
  return cached(input.cache, "pairs", of, async () => {
    const moving = await image(input, source, settings);
    const found: PairShift[] = [];
    for (const a of against) {
      found.push(measurePair(await image(input, a.source, settings), moving, a.predicted, settings.drift));
    }
    return found;
  });
}
