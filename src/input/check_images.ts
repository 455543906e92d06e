import type { ChannelName, Notice } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { checkFrame, SizeCheck, type CheckedFrame } from "./check_frame.js";
import { placeKey, type HeaderBook } from "./image_headers.js";
import { mayBeSamplesOfStack, type PageShape } from "./image_types.js";
import { kelvin, type ImageKey } from "./schema.js";
import {
  framesOfStacks,
  type WrittenFrame,
  type WrittenSeries,
  type WrittenStack,
  type WrittenStacks,
} from "./series_frames.js";
import { withPage } from "./source_path.js";

export interface ImageChecks {
  readonly scales: Readonly<Record<ChannelName, number>>;
  readonly headers: HeaderBook;
  readonly problems: Problem[];
  readonly notices: Notice[];
  /** There is a thermometer's log: stacks with scan times need no temperatures. */
  readonly fromLog: boolean;
  /** Of a run that goes on: what is still to come is told here and is no problem. null: everything must be there. */
  readonly waiting: Problem[] | null;
}

export interface CheckedSeries {
  /** Without fault; of a run that goes on those before the first that cannot be used yet. */
  readonly frames: readonly CheckedFrame[];
  /** How many are described. */
  readonly described: number;
}

/**
 * Looks at the headers of every image: is it there, can it be read, has it the page, has it the size of the cooldown's first
 * signal. No pixels are read. Appends to `problems`, a line a file where several pages share one fault.
 * @returns an entry a series
 */
export async function checkImages(series: readonly WrittenSeries[], checks: ImageChecks): Promise<CheckedSeries[]> {
  const sizes = new SizeCheck();
  const out: CheckedSeries[] = [];
  const { headers, scales } = checks;
  for (const s of series) {
    const wrongStacks = new Set<string>();
    const stacked = s.stacks === null ? null : await checkStacks(s.stacks, wrongStacks, checks);
    const written = stacked?.frames ?? s.frames;
    const frames: CheckedFrame[] = [];
    for (const frame of written) {
      const problems = checks.waiting ?? checks.problems;
      const checked = await checkFrame(frame, { headers, scales, sizes, problems, wrongStacks });
      if (checked !== null) frames.push(checked);
      else if (checks.waiting !== null) break;
    }
    out.push({ frames, described: stacked?.described ?? written.length });
  }
  checks.problems.push(...sizes.problems());
  return out;
}

/** The frames of stacks: one a temperature, as given, or else as the axis of one of the files says. */
async function checkStacks(
  s: WrittenStacks,
  wrongStacks: Set<string>,
  { headers, problems, notices, fromLog, waiting }: ImageChecks,
): Promise<{ readonly frames: WrittenFrame[]; readonly described: number }> {
  const none = { frames: [], described: 0 };
  const claims: { readonly label: string; readonly temperaturesK: readonly number[] }[] = [];
  const pages = new Map<ImageKey, { readonly stack: WrittenStack; readonly shapes: readonly PageShape[] }>();
  for (const stack of s.stacks) {
    const h = await headers.of(stack);
    if (h === null) continue;
    pages.set(stack.image, { stack, shapes: h.pages });
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
    return none;
  }
  if (claim !== undefined && s.temperaturesK === null && temperatures.some((t) => !kelvin.safeParse(t).success)) {
    problems.push({
      at: plainText(claim.label),
      problem: "its axis holds temperatures outside 0 to 1000 K",
      fix: "mend the axis or its unit, or give temperatures_K",
    });
    return none;
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
  const one = temperatures === timed ? "scan time" : "temperature";
  let usable = temperatures.length;
  const bySample = new Set<ImageKey>();
  for (const [image, { stack, shapes }] of pages) {
    const [label, key, found] = [stack.written, placeKey(stack), shapes.length];
    const { planes, complex } = shapes[0];
    const several = planes > 1 && !complex && stack.sample === null;
    if (several && mayBeSamplesOfStack(shapes) && planes === temperatures.length) {
      bySample.add(image);
      const message = `${plainText(label)} is one page of ${planes} samples a pixel: read as a stack of ${planes} pages`;
      notices.push({ frame: null, code: "samples-as-pages", message });
      continue;
    }
    if (wrongStacks.has(key)) continue;
    if (found === temperatures.length) {
      if (!several) continue;
      wrongStacks.add(key);
      problems.push({
        at: stack.at,
        problem: `${image} is "${plainText(label)}", which has ${planes} samples a pixel`,
        fix: `say which: "${plainText(withPage(label, null))}#:0" is the first of every page`,
      });
      continue;
    }
    const where = temperatures === timed ? "started_at and ended_at" : "temperatures_K";
    const samples = several ? ` of ${planes} samples a pixel` : "";
    const problem = `${countOf(found, "page")}${samples} for ${countOf(temperatures.length, one)}`;
    if (waiting !== null) {
      usable = Math.min(usable, found);
      const fix = found < temperatures.length ? "wait for its pages" : `add to ${where} (near ${s.at}) what is missing`;
      waiting.push({ at: plainText(label), problem, fix });
      continue;
    }
    wrongStacks.add(key);
    problems.push({
      at: plainText(label),
      problem,
      fix: `make ${where} (near ${s.at}) one ${temperatures === timed ? "time" : "temperature"} a page, or use a frames table to leave pages out`,
    });
  }
  return { frames: framesOfStacks(s, temperatures.slice(0, usable), bySample), described: temperatures.length };
}
