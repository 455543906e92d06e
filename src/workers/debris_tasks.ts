import type { Tip } from "../model/cooldown.js";
import type { CleanFrame, Drift } from "../model/signal.js";
import type { Settings } from "../settings.js";
import { DebrisAccumulator, debrisInFrame, findDebrisInFrame, type DebrisMap } from "../stages/debris/index.js";
import { cleanOf, type FrameSource, type Run } from "./clean_task.js";
import { forgetImages } from "./pairs_task.js";
import { drop, fetchKept, keep } from "./scratch.js";

export interface DebrisInput extends Run {
  readonly drifts: readonly Drift[];
  /** Of the largest frame. */
  readonly size: { readonly rows: number; readonly cols: number };
  readonly tip: Tip | null;
  readonly part: number;
  readonly settings: Pick<Settings, "debris">;
}

/** Name of the map in the scratch folder. */
export const DEBRIS_MAP = "debris";

/** Frames whose debris is collected together, in order. Fixed by the number of frames alone: sums are rounded, and the answer must not hang on the
 *  number of workers. */
export function debrisParts(frames: number): number[][] {
  // An even number, for two cores; each part costs a grid.
  const each = Math.ceil(frames / (frames > 16 ? 4 : frames > 8 ? 2 : 1));
  return Array.from({ length: Math.ceil(frames / each) }, (_, k) =>
    Array.from({ length: Math.min(each, frames - k * each) }, (_, i) => k * each + i),
  );
}

/** What stays on the sample while domains come and go, as some of the frames show it. */
export async function debris(input: DebrisInput & { readonly frames: readonly FrameSource[] }): Promise<void> {
  forgetImages();
  const accumulator = new DebrisAccumulator(input.drifts, input.tip, input.settings.debris, input.size);
  for (const source of input.frames) {
    const drift = input.drifts[source.info.frame];
    if (drift !== undefined && drift.xNm !== null) accumulator.accumulate(await cleanOf(input, source), drift);
  }
  keep(input.scratch, `debris-${input.part}`, accumulator.part);
}

/** The map from all parts, 0 … `part`. */
export function debrisMap(input: DebrisInput): void {
  const accumulator = new DebrisAccumulator(input.drifts, input.tip, input.settings.debris, input.size);
  for (let k = 0; k <= input.part; k++) {
    accumulator.addPart(fetchKept<DebrisAccumulator["part"]>(input.scratch, `debris-${k}`));
    drop(input.scratch, `debris-${k}`);
  }
  keep(input.scratch, DEBRIS_MAP, accumulator.finish());
}

/** A frame once all are placed. */
export interface FrameInput extends Run {
  readonly frame: number;
  readonly source: FrameSource;
  readonly drift: Drift;
  readonly tip: Tip | null;
  /** Key of the map of debris. */
  readonly debris: string;
}

/** Debris in one frame: 0 free, CORE, MARGIN. */
export function debrisOf(
  input: FrameInput & { readonly settings: Pick<Settings, "debris"> },
  clean: CleanFrame,
): Uint8Array {
  if (input.drift.xNm === null) return findDebrisInFrame(clean, input.tip, input.settings.debris);
  const map = fetchKept<DebrisMap>(input.scratch, DEBRIS_MAP);
  const [rows, cols] = clean.amplitude.values.shape as [number, number];
  return debrisInFrame(map, input.drift, rows, cols);
}

/** Whether debris can be told apart in this frame: by its own topography, or by its place on the sample, well known. */
export function knowsDebris(drift: Drift, clean: CleanFrame): boolean {
  return clean.topography !== null || (drift.sdNm !== null && drift.sdNm <= Math.max(clean.pixel.xNm, clean.pixel.yNm));
}
