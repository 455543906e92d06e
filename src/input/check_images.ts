import { CHANNELS, type ChannelName, type ChannelSource } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { ImageFileError } from "./byte_file.js";
import { withImage } from "./image_file.js";
import type { OpenImage } from "./image_types.js";
import type { WrittenFrame, WrittenSeries, WrittenSource } from "./series_frames.js";

/** What the headers say of one file: or what is wrong with it. */
type Headers = Pick<OpenImage, "format" | "pages"> | { readonly error: Problem };

export interface CheckedFrame {
  readonly written: WrittenFrame;
  readonly rows: number;
  readonly cols: number;
  readonly sources: Partial<Record<ChannelName, ChannelSource>> & { readonly amplitude: ChannelSource };
}

/**
 * Looks at the headers of every image: is it there, can it be read, has it the page, has it the size of the cooldown's first
 * amplitude. No pixels are read. Appends to `problems`, a line a file where several pages share one fault.
 * @returns for each series its frames without fault
 */
export async function checkImages(
  series: readonly WrittenSeries[],
  scales: Readonly<Record<ChannelName, number>>,
  problems: Problem[],
): Promise<CheckedFrame[][]> {
  const headers = new Map<string, Headers>();
  const complained = new Set<string>();
  const headersOf = async (s: WrittenSource): Promise<Exclude<Headers, { error: Problem }> | null> => {
    let h = headers.get(s.path);
    if (h === undefined) {
      h = await readHeaders(s);
      headers.set(s.path, h);
    }
    if (!("error" in h)) return h;
    if (!complained.has(s.path)) problems.push(h.error);
    complained.add(s.path);
    return null;
  };
  const sizes = new SizeCheck();
  const out: CheckedFrame[][] = [];
  for (const s of series) {
    const shortStacks = new Set<string>();
    for (const stack of s.stacks) {
      const h = await headersOf(stack);
      if (h === null || stack.temperatures < 0 || h.pages.length === stack.temperatures) continue;
      shortStacks.add(stack.path);
      problems.push({
        at: plainText(stack.written),
        problem: `${countOf(h.pages.length, "page")} for ${countOf(stack.temperatures, "temperature")}`,
        fix: `make temperatures_K (near ${stack.at}) one temperature a page, or use a frames table to leave pages out`,
      });
    }
    const frames: CheckedFrame[] = [];
    for (const frame of s.frames) {
      const checked = await checkFrame(frame, scales, headersOf, shortStacks, sizes, problems);
      if (checked !== null) frames.push(checked);
    }
    out.push(frames);
  }
  problems.push(...sizes.problems());
  return out;
}

async function readHeaders(s: WrittenSource): Promise<Headers> {
  try {
    return await withImage(s.path, ({ format, pages }) => ({ format, pages }));
  } catch (e) {
    if (!(e instanceof ImageFileError)) throw e;
    return { error: imageProblem(e, s.written) };
  }
}

/** What is wrong with an image file, under the name the user gave it. */
export function imageProblem(e: ImageFileError, written: string): Problem {
  const file = plainText(written);
  const at = e.page === null || file.endsWith(`#${e.page}`) ? file : `${file.replace(/#\d+$/, "")}#${e.page}`;
  return { at, problem: e.message, fix: e.fix };
}

async function checkFrame(
  frame: WrittenFrame,
  scales: Readonly<Record<ChannelName, number>>,
  headersOf: (s: WrittenSource) => Promise<Pick<OpenImage, "format" | "pages"> | null>,
  shortStacks: ReadonlySet<string>,
  sizes: SizeCheck,
  problems: Problem[],
): Promise<CheckedFrame | null> {
  const sources: Partial<Record<ChannelName, ChannelSource>> = {};
  let shape: { rows: number; cols: number } | null = null;
  let sound = true;
  // The amplitude first: the other channels are measured against it.
  for (const channel of [...CHANNELS].sort((a) => (a === "amplitude" ? -1 : 0))) {
    const s = frame.sources[channel];
    if (s === undefined) continue;
    const h = await headersOf(s);
    const page = s.page ?? 0;
    if (h !== null && s.page === null && h.pages.length !== 1) {
      problems.push({
        at: s.at,
        problem: `${channel} is "${plainText(s.written)}", a stack of ${h.pages.length} pages`,
        fix: `say which page: "${plainText(s.written)}#0" is the first`,
      });
      sound = false;
    } else if (h !== null && page >= h.pages.length) {
      if (!shortStacks.has(s.path)) {
        problems.push({
          at: s.at,
          problem: `${channel} is "${plainText(s.written)}", but the file has ${countOf(h.pages.length, "page")}`,
          fix: "pages count from 0",
        });
      }
      sound = false;
    } else if (h !== null) {
      const { rows, cols } = h.pages[page];
      if (channel === "amplitude") shape = { rows, cols };
      sizes.add(s, rows, cols);
      sources[channel] = { file: s.path, label: s.written, format: h.format, page, scale: scales[channel] };
    } else sound = false;
  }
  if (!sound || shape === null || sources.amplitude === undefined) return null;
  return { written: frame, ...shape, sources: { ...sources, amplitude: sources.amplitude } };
}

/** All images of a cooldown must have one size: that of its first amplitude. */
class SizeCheck {
  #first: { label: string; rows: number; cols: number } | null = null;
  readonly #wrong = new Map<string, { label: string; size: string; count: number }>();

  add(s: WrittenSource, rows: number, cols: number): void {
    this.#first ??= { label: s.written, rows, cols };
    if (rows === this.#first.rows && cols === this.#first.cols) return;
    const size = `${cols} × ${rows}`;
    const known = this.#wrong.get(`${s.path} ${size}`);
    if (known === undefined) this.#wrong.set(`${s.path} ${size}`, { label: s.written, size, count: 1 });
    else known.count++;
  }

  problems(): Problem[] {
    const first = this.#first;
    if (first === null) return [];
    return [...this.#wrong.values()].map((w) => ({
      at: plainText(w.label),
      problem:
        `${w.size} pixels${w.count > 1 ? ` (and ${countOf(w.count - 1, "page")} more of this file)` : ""}; ` +
        `${plainText(first.label)} has ${first.cols} × ${first.rows}`,
      fix: "all images of a cooldown need one size (columns × rows): crop them alike, or leave this channel or frame out",
    }));
  }
}
