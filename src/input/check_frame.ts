import type { ChannelName, ChannelSource, ImagePlace } from "../model/cooldown.js";
import type { Problem } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { placeKey, type HeaderBook, type Headers } from "./image_headers.js";
import { IMAGE_KEYS, type ImageKey } from "./schema.js";
import type { WrittenFrame, WrittenSource } from "./series_frames.js";

export interface CheckedFrame {
  readonly written: WrittenFrame;
  readonly rows: number;
  readonly cols: number;
  readonly sources: Partial<Record<ChannelName, ChannelSource>> & { readonly amplitude: ChannelSource };
}

export interface FrameChecks {
  readonly headers: HeaderBook;
  readonly scales: Readonly<Record<ChannelName, number>>;
  readonly sizes: SizeCheck;
  readonly problems: Problem[];
  /** Files with a wrong number of pages or samples, which is told once for the whole stack. */
  readonly wrongStacks: ReadonlySet<string>;
}

const SIGNALS: readonly ImageKey[] = ["amplitude", "signal", "real"];

/** Looks up every image of one frame in the headers. null where one of them cannot be used. */
export async function checkFrame(frame: WrittenFrame, checks: FrameChecks): Promise<CheckedFrame | null> {
  const places: Partial<Record<ImageKey, ImagePlace>> = {};
  let shape: { rows: number; cols: number } | null = null;
  let sound = true;
  // The signal first: the other images are measured against it.
  const keys = [...IMAGE_KEYS].sort((a, b) => Number(SIGNALS.includes(b)) - Number(SIGNALS.includes(a)));
  for (const image of keys) {
    const s = frame.sources[image];
    if (s === undefined) continue;
    const h = await checks.headers.of(s);
    const place = h === null ? null : checkPlace(image, s, h, checks);
    if (place === null || h === null) {
      sound = false;
      continue;
    }
    const { rows, cols } = h.pages[place.page];
    checks.sizes.add(s, rows, cols);
    if (SIGNALS.includes(image)) shape = { rows, cols };
    // Told with the sizes; such a frame cannot be read.
    else if (shape !== null && (rows !== shape.rows || cols !== shape.cols)) sound = false;
    places[image] = place;
  }
  const sources = sourcesOf(places, checks.scales);
  if (!sound || shape === null || sources.amplitude === undefined) return null;
  return { written: frame, ...shape, sources: { ...sources, amplitude: sources.amplitude } };
}

function checkPlace(image: ImageKey, s: WrittenSource, h: Headers, checks: FrameChecks): ImagePlace | null {
  const page = s.page ?? 0;
  const name = plainText(s.written);
  const refuse = (problem: string, fix: string): null => {
    checks.problems.push({ at: s.at, problem: `${image} is "${name}", ${problem}`, fix });
    return null;
  };
  if (s.page === null && h.pages.length !== 1) {
    return refuse(`a stack of ${h.pages.length} pages`, `say which page: "${name}#0" is the first`);
  }
  const shape = h.pages[page];
  if (shape === undefined) {
    if (checks.wrongStacks.has(placeKey(s))) return null;
    return refuse(`but the file has ${countOf(h.pages.length, "page")}`, "pages count from 0");
  }
  if (shape.complex && image !== "signal") {
    return refuse("which holds complex numbers", "name it `signal`: it gives amplitude and phase");
  }
  if (image === "signal" && !shape.complex) {
    return refuse(
      `which holds real numbers (${shape.type}); a signal is complex`,
      "name it `amplitude`, or give `real` and `imaginary`",
    );
  }
  if (!shape.complex && shape.planes > 1 && s.sample === null) {
    if (checks.wrongStacks.has(placeKey(s))) return null;
    const where = s.page === null ? "" : page;
    return refuse(
      `which has ${shape.planes} samples a pixel`,
      `say which: "${plainText(s.written.replace(/#.*$/, ""))}#${where}:0" is the first`,
    );
  }
  if (s.sample !== null && (shape.complex || s.sample >= shape.planes)) {
    return refuse(`but a pixel has ${countOf(shape.complex ? 1 : shape.planes, "sample")}`, "samples count from 0");
  }
  return {
    file: s.path,
    label: s.written,
    format: h.format,
    page,
    ...(s.dataset === null ? {} : { dataset: s.dataset }),
    ...(s.sample === null ? {} : { sample: s.sample }),
  };
}

function sourcesOf(
  p: Partial<Record<ImageKey, ImagePlace>>,
  scales: Readonly<Record<ChannelName, number>>,
): Partial<Record<ChannelName, ChannelSource>> {
  const sources: Partial<Record<ChannelName, ChannelSource>> = {};
  for (const channel of ["topography", "amplitude", "phase"] as const) {
    const place = p[channel];
    const retrace = p[`${channel}_retrace`];
    if (place === undefined) continue;
    sources[channel] = { ...place, scale: scales[channel], ...(retrace === undefined ? {} : { retrace }) };
  }
  const complex = p.signal ?? (p.imaginary === undefined ? undefined : p.real);
  if (complex !== undefined) {
    // Both come from the same numbers; the phase of a complex number is in rad whatever `channels` says.
    const parts = p.imaginary === undefined ? {} : { imaginary: p.imaginary };
    sources.amplitude = { ...complex, scale: 1, complex: "modulus", ...parts };
    sources.phase = { ...complex, scale: 1, complex: "argument", ...parts };
  }
  return sources;
}

/** All images of a cooldown must have one size: that of its first signal. */
export class SizeCheck {
  #first: { label: string; rows: number; cols: number } | null = null;
  readonly #wrong = new Map<string, { label: string; size: string; count: number }>();

  add(s: WrittenSource, rows: number, cols: number): void {
    this.#first ??= { label: s.written, rows, cols };
    if (rows === this.#first.rows && cols === this.#first.cols) return;
    const size = `${cols} × ${rows}`;
    const key = `${placeKey(s)} ${size}`;
    const known = this.#wrong.get(key);
    if (known === undefined) this.#wrong.set(key, { label: s.written, size, count: 1 });
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
