import { CHANNELS, type ChannelName, type FrameInfo, type Notice, type RawFrame } from "../model/cooldown.js";
import { InputError, type Problem } from "../model/errors.js";
import { dataOf, type Raster } from "../model/raster.js";
import { endsOf, type Ends } from "../raster/ends.js";
import { type Oddity, swappedChannels } from "./swapped_channels.js";
import { countOf, plainText } from "../model/text.js";

/**
 * Looks at the pixels of one loaded frame for what its headers cannot tell, and returns what the user must be told: an optional
 * channel without an image, a plateau at an extreme (clipped), an amplitude below zero, a phase or topography whose numbers do not
 * look like their unit. Throws InputError, with all that is wrong at once, where the frame cannot be used: an amplitude
 * without a measured pixel or with one single value, infinite values anywhere.
 * @param info the frame's sources, for names in messages and to tell a channel without an image from one that was never given
 */
export function inspectFrame(raw: RawFrame, info?: FrameInfo): Notice[] {
  const problems: Problem[] = [];
  const notices: Notice[] = [...(raw.notices ?? [])];
  const { frame } = raw;
  if (info?.excluded !== undefined) {
    return [{ frame, code: "excluded-frame", message: `left out: ${plainText(info.excluded)}` }];
  }
  for (const r of info?.excludedRegions ?? []) {
    const place = `(${r.x0Nm}, ${r.y0Nm}) to (${r.x1Nm}, ${r.y1Nm}) nm`;
    notices.push({ frame, code: "excluded-region", message: `${place} left out: ${plainText(r.reason)}` });
  }
  for (const channel of CHANNELS) {
    const raster = raw[channel];
    const source = info?.sources[channel];
    const label = source === undefined ? `frame ${raw.frame}` : plainText(source.label);
    const notice = ({ code, message, varies = [] }: Oddity): void => {
      notices.push({ frame, code, message: `${channel} (${label}): ${message}`, varies: [label, ...varies] });
    };
    if (raster === null) {
      if (source !== undefined) {
        notice({ code: "empty-channel", message: "no measured pixel, or one single value: counts as missing" });
      }
      continue;
    }
    const range = rangeOf(raster);
    const problem = unusable(channel, range, frame);
    if (problem !== null) problems.push({ at: label, ...problem });
    else oddities(channel, raster, range).forEach(notice);
  }
  if (problems.length > 0) throw new InputError(problems);
  const swapped = swappedChannels(raw);
  if (swapped !== null) notices.push({ frame, ...swapped });
  return notices;
}

interface Range extends Ends {
  readonly pixels: number;
  readonly negative: number;
}

function rangeOf(raster: Raster): Range {
  const data = dataOf(raster);
  const ends = endsOf(data);
  let negative = 0;
  if (ends.low.value < 0) for (let k = 0; k < data.length; k++) if (data[k] < 0 && data[k] > -Infinity) negative++;
  return { ...ends, pixels: data.length, negative };
}

/** How the description leaves a whole frame out. */
const leavingOut = (frame: number, reason: string): string =>
  `leave this frame out with \`- { frame: ${frame}, reason: ${reason} }\` under \`exclude:\` in the YAML file (of several files: with its number in its own, from 0), or give its image`;

function unusable(channel: ChannelName, r: Range, frame: number): Omit<Problem, "at"> | null {
  if (r.infinite > 0) {
    const problem = `${channel} with ${countOf(r.infinite, "value")} of ${r.pixels} that ${r.infinite === 1 ? "is" : "are"} infinite in single precision, which ends at 3.4e38`;
    return { problem, fix: "write pixels that were not measured as not-a-number, and large values in a larger unit" };
  }
  if (channel !== "amplitude") return null;
  if (r.measured === 0) {
    return { problem: "amplitude without a single measured pixel", fix: leavingOut(frame, "nothing measured") };
  }
  if (r.negative > 0.9 * r.measured) {
    const problem = `amplitude below zero in ${percent(r.negative / r.measured)} of its pixels, and an amplitude has no sign`;
    return {
      problem,
      fix: "name the amplitude's own image; a signed component belongs under `real`, with `imaginary`",
    };
  }
  if (r.low.value === r.high.value) {
    const problem = `amplitude with one value, ${r.low.value}, in all ${r.measured} measured pixels`;
    return { problem, fix: leavingOut(frame, "one single value") };
  }
  return null;
}

/** A plateau: so many pixels at the extreme, and far more than at the next value inwards, as no smooth distribution has. */
const MIN_PLATEAU_SHARE = 0.002;
const MIN_PLATEAU_PIXELS = 16;
const PLATEAU_OVER_NEXT = 3;

function oddities(channel: ChannelName, raster: Raster, r: Range): Oddity[] {
  const out: Oddity[] = [];
  for (const [end, word] of [
    [r.low, "lowest"],
    [r.high, "highest"],
  ] as const) {
    const least = Math.max(MIN_PLATEAU_PIXELS, MIN_PLATEAU_SHARE * r.measured);
    if (end.count >= least && end.count > PLATEAU_OVER_NEXT * end.nextCount) {
      const share = percent(end.count / r.measured);
      out.push({
        code: "clipped-channel",
        message: `${share} of the pixels have the ${word} value ${end.value}: clipped?`,
        varies: [share, String(end.value)],
      });
    }
  }
  const span = r.high.value - r.low.value;
  const spanText = span.toPrecision(3);
  if (channel === "amplitude" && r.negative > 0) {
    const swapped = r.negative > 0.05 * r.measured ? "; is it the amplitude?" : "";
    const share = percent(r.negative / r.measured);
    out.push({
      code: "negative-amplitude",
      message: `${share} of the pixels lie below zero${swapped}`,
      varies: [share],
    });
  }
  if (channel === "phase" && span > 8 * Math.PI && wideShare(raster, 4 * Math.PI) > 0.02) {
    out.push({ code: "phase-unit", message: `spans ${spanText} rad: is the file in degrees?`, varies: [spanText] });
  }
  if (channel === "topography" && (span > 20_000 || span < 0.05)) {
    out.push({ code: "topography-unit", message: `spans ${spanText} nm: is its unit right?`, varies: [spanText] });
  }
  return out;
}

/** Share of the pixels further than `reach` from the median-like middle of the range. */
function wideShare(raster: Raster, reach: number): number {
  const data = Array.from(raster.values.data)
    .filter((v) => !Number.isNaN(v))
    .sort((a, b) => a - b);
  const middle = data[data.length >> 1] ?? 0;
  return data.filter((v) => Math.abs(v - middle) > reach).length / Math.max(1, data.length);
}

function percent(share: number): string {
  return share < 0.001 ? "less than 0.1 %" : `${(100 * share).toFixed(1)} %`;
}
