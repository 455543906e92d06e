import type { ChannelName, Notice } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { checkFrame, SizeCheck, type CheckedFrame } from "./check_frame.js";
import { placeKey, type HeaderBook } from "./image_headers.js";
import { kelvin } from "./schema.js";
import { framesOfStacks, type WrittenFrame, type WrittenSeries, type WrittenStacks } from "./series_frames.js";

/**
 * Looks at the headers of every image: is it there, can it be read, has it the page, has it the size of the cooldown's first
 * signal. No pixels are read. Appends to `problems`, a line a file where several pages share one fault.
 * @param fromLog there is a thermometer's log: stacks with scan times need no temperatures
 * @returns for each series its frames without fault
 */
export async function checkImages(
  series: readonly WrittenSeries[],
  scales: Readonly<Record<ChannelName, number>>,
  headers: HeaderBook,
  problems: Problem[],
  notices: Notice[],
  fromLog: boolean,
): Promise<CheckedFrame[][]> {
  const sizes = new SizeCheck();
  const out: CheckedFrame[][] = [];
  for (const s of series) {
    const wrongStacks = new Set<string>();
    const written =
      s.stacks === null ? s.frames : await checkStacks(s.stacks, headers, wrongStacks, problems, notices, fromLog);
    const frames: CheckedFrame[] = [];
    for (const frame of written) {
      const checked = await checkFrame(frame, { headers, scales, sizes, problems, wrongStacks });
      if (checked !== null) frames.push(checked);
    }
    out.push(frames);
  }
  problems.push(...sizes.problems());
  return out;
}

/** The frames of stacks: one a temperature, as given, or else as the axis of one of the files says. */
async function checkStacks(
  s: WrittenStacks,
  headers: HeaderBook,
  wrongStacks: Set<string>,
  problems: Problem[],
  notices: Notice[],
  fromLog: boolean,
): Promise<WrittenFrame[]> {
  const claims: { readonly label: string; readonly temperaturesK: readonly number[] }[] = [];
  const pages = new Map<string, { readonly label: string; readonly key: string; readonly pages: number }>();
  for (const stack of s.stacks) {
    const h = await headers.of(stack);
    if (h === null) continue;
    const key = placeKey(stack);
    pages.set(stack.image, { label: stack.written, key, pages: h.pages.length });
    const { temperaturesK } = h.claims;
    if (temperaturesK !== null) claims.push({ label: stack.written, temperaturesK });
  }
  const claim = claims[0];
  const timed = fromLog ? s.times?.map(() => null) : undefined;
  const temperatures: readonly (number | null)[] | undefined = s.temperaturesK ?? claim?.temperaturesK ?? timed;
  if (temperatures === undefined) {
    problems.push({
      at: s.at,
      problem: "stacks without temperatures_K",
      fix: fromLog
        ? "add `temperatures_K: [ … ]`, or `started_at` and `ended_at` to look them up in the log; one a page"
        : "add `temperatures_K: [ … ]`, one temperature a page",
    });
    return [];
  }
  if (claim !== undefined && s.temperaturesK === null && temperatures.some((t) => !kelvin.safeParse(t).success)) {
    problems.push({
      at: plainText(claim.label),
      problem: "its axis holds temperatures outside 0 to 1000 K",
      fix: "mend the axis or its unit, or give temperatures_K",
    });
    return [];
  }
  if (s.times !== null && s.times.length !== temperatures.length) {
    problems.push({
      at: s.at,
      problem: `${countOf(s.times.length, "time")} in started_at; the axis of ${plainText(claim?.label ?? "")} has ${countOf(temperatures.length, "temperature")}`,
      fix: "give one time a page",
    });
  }
  for (const c of claims) {
    const off = c.temperaturesK.filter((t, k) => Math.abs(t - (temperatures[k] ?? t)) > 0.5).length;
    if (off === 0) continue;
    const message = `${countOf(off, "temperature")} of the axis of ${c.label} differ by more than 0.5 K from those that are used`;
    notices.push({ frame: null, code: "temperature-differs", message });
  }
  for (const { label, key, pages: found } of pages.values()) {
    if (found === temperatures.length || wrongStacks.has(key)) continue;
    wrongStacks.add(key);
    problems.push({
      at: plainText(label),
      problem: `${countOf(found, "page")} for ${countOf(temperatures.length, temperatures === timed ? "scan time" : "temperature")}`,
      fix: `make ${temperatures === timed ? "started_at and ended_at" : "temperatures_K"} (near ${s.at}) one ${temperatures === timed ? "time" : "temperature"} a page, or use a frames table to leave pages out`,
    });
  }
  return framesOfStacks(s, temperatures);
}
