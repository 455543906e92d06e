import type { Branch, FrameInfo } from "../model/cooldown.js";
import type { CheckedFrame } from "./check_frame.js";
import { cycleNumbers } from "./cycles.js";
import type { ScanTemperatures } from "./thermometry.js";

/**
 * The frames of all series in the order of the YAML file, with their cycles.
 * @param series       index in the YAML file and branch of each series
 * @param checked      the frames of each
 * @param temperatures from the log, an entry a frame of all series together; null where a frame keeps its own; empty without a log
 */
export function numberFrames(
  series: readonly { readonly index: number; readonly branch: Branch }[],
  checked: readonly (readonly CheckedFrame[])[],
  temperatures: readonly (ScanTemperatures | null)[],
): FrameInfo[] {
  let frame = 0;
  const numbered = checked.map((frames) => frames.map((f) => ({ f, frame: frame++ })));
  const kelvin = (at: { readonly f: CheckedFrame; readonly frame: number } | undefined): number =>
    at === undefined ? NaN : (temperatures[at.frame]?.temperatureK ?? at.f.written.temperatureK ?? NaN);
  const cycles = cycleNumbers(
    series.map((s, i) => ({
      branch: s.branch,
      firstK: kelvin(numbered[i]?.[0]),
      lastK: kelvin(numbered[i]?.at(-1)),
    })),
  );
  return series.flatMap((s, i) =>
    (numbered[i] ?? []).map((at): FrameInfo => {
      const { written, rows, cols, sources } = at.f;
      const { startedAt, endedAt, stageXNm, stageYNm } = written;
      const temperatureK = kelvin(at);
      return {
        frame: at.frame,
        series: s.index,
        branch: s.branch,
        cycle: cycles[i],
        temperatureK,
        ...temperatures[at.frame],
        startedAt,
        endedAt,
        stageXNm,
        stageYNm,
        rows,
        cols,
        sources,
      };
    }),
  );
}
