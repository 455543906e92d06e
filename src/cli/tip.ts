import { InputError, UsageError } from "../model/errors.js";
import { defaultsOf } from "../model/settings.js";
import { plainText } from "../model/text.js";
import type { Cooldown, FrameInfo } from "../model/cooldown.js";
import { closeImages, loadFrame, readCooldown } from "../input/index.js";
import { cleanFrame, cleanSettings } from "../stages/clean/index.js";
import {
  type CutLine,
  type Place,
  type TipChannel,
  type TipImage,
  type TipSettings,
  findTipFeatures,
  lineWidthNm,
  measureTip,
  prepareTipImage,
  tipSettings,
} from "../stages/tip/index.js";
import { print, say } from "./say.js";
import { measuredJson, measuredText, searchJson, searchText, statedRemark, type TipSubject } from "./tip_text.js";

export interface TipOptions {
  readonly frame: string;
  readonly channel?: TipChannel;
  readonly from?: string;
  readonly to?: string;
  readonly width?: string;
  readonly model?: "edge" | "particle";
  readonly size?: string;
  readonly find?: boolean;
  readonly count: string;
  readonly raw?: boolean;
  readonly allowOutside?: boolean;
  readonly format: "text" | "json";
}

/** `coldseam tip`: the tip's resolution from a line over a sharp edge or a particle, or the places in a frame that show it best. */
export async function tip(yaml: string, o: TipOptions): Promise<void> {
  const wanted = o.find === true ? null : lineOf(o);
  const width = positive(o.width, "--width");
  const size = positive(o.size, "--size");
  const count = positive(o.count, "--count") ?? 10;
  const cooldown = await readCooldown(yaml, { allowOutside: o.allowOutside === true, hashSources: false });
  const info = frameOf(cooldown, o.frame);
  try {
    const image = await imageOf(cooldown, info, o, yaml);
    const s: TipSettings = {
      ...defaultsOf(tipSettings),
      widthNm: width ?? 0,
      expectedNm: cooldown.tip?.resolutionNm ?? 0,
    };
    if (image.channel === "topography")
      say("note: the topography shows how sharp the tip is to the touch, not what its near field resolves");
    const subject: TipSubject = { cooldown, info, channel: image.channel, yaml };
    if (wanted === null) {
      const search = findTipFeatures(image.image, s, count);
      print(o.format === "json" ? searchJson(subject, search) : searchText(subject, search));
      return;
    }
    const line: CutLine = { ...wanted, widthNm: lineWidthNm(image.image, s) };
    const result = measureTip(image.image, line, s, { model: o.model ?? null, sizeNm: size });
    if (result.status === "unusable") {
      throw new InputError({
        at: `${plainText(yaml)}, frame ${info.frame}, ${image.channel}`,
        problem: result.message,
        fix:
          result.reason === "outside"
            ? "give --from and --to in nm of the frame: column × pixel_x, row × pixel_y"
            : "lay the line over a sharp edge or a small particle; `--find` proposes some",
      });
    }
    print(o.format === "json" ? measuredJson(subject, line, result) : measuredText(subject, line, result));
    for (const w of result.warnings) say(`warning: ${w.message}`);
    const remark = statedRemark(cooldown, result);
    if (remark !== null) say(`warning: ${remark}`);
  } finally {
    await closeImages();
  }
}

function positive(text: string | undefined, option: string): number | null {
  if (text === undefined) return null;
  const v = text.trim() === "" ? Number.NaN : Number(text);
  if (!(v > 0) || !Number.isFinite(v))
    throw new UsageError(`${option} ${text}: expected a number above 0`, "lengths are in nm");
  return v;
}

function lineOf(o: TipOptions): { from: Place; to: Place } {
  if (o.from === undefined || o.to === undefined)
    throw new UsageError(
      "a line needs --from X,Y and --to X,Y",
      "nm of the frame, for example --from 420,610 --to 560,610; or let --find propose lines",
    );
  const from = placeOf(o.from, "--from");
  const to = placeOf(o.to, "--to");
  if (from.xNm === to.xNm && from.yNm === to.yNm)
    throw new UsageError(
      "--from and --to are the same point",
      "the line must pass over the feature from one side to the other",
    );
  return { from, to };
}

function placeOf(text: string, option: string): Place {
  const parts = text.split(",").map((v) => (v.trim() === "" ? Number.NaN : Number(v)));
  if (parts.length !== 2 || !parts.every(Number.isFinite))
    throw new UsageError(`${option} ${text}: expected X,Y in nm of the frame`, `for example ${option} 420,610`);
  return { xNm: parts[0], yNm: parts[1] };
}

function frameOf(cooldown: Cooldown, text: string): FrameInfo {
  const info = cooldown.frames[Number(text)];
  if (!/^\d+$/.test(text.trim()) || info === undefined)
    throw new UsageError(
      `--frame ${text}: no such frame`,
      `${plainText(cooldown.cooldown)} has frames 0 to ${cooldown.frames.length - 1}, in the order of the YAML file`,
    );
  return info;
}

/** The channel asked for, rows aligned and scars left out unless the file's own pixels are wanted; without a choice amplitude and
 *  phase together where there is a phase. */
async function imageOf(
  cooldown: Cooldown,
  info: FrameInfo,
  o: TipOptions,
  yaml: string,
): Promise<{ image: TipImage; channel: TipChannel }> {
  const raw = await loadFrame(cooldown, info);
  const frame = o.raw === true ? raw : cleanFrame(raw, defaultsOf(cleanSettings)).clean;
  const channel = o.channel ?? (frame.phase === null ? "amplitude" : "complex");
  const image = prepareTipImage(frame, channel);
  if (image !== null) return { image, channel };
  const missing =
    (channel === "topography" && frame.topography === null) || (/phase|complex/.test(channel) && frame.phase === null);
  throw new InputError({
    at: `${plainText(yaml)}, frame ${info.frame}`,
    problem: missing
      ? `--channel ${channel}: the frame has no ${channel === "complex" ? "phase" : channel}`
      : `${channel}: too few measured pixels to tell its noise`,
    fix: missing
      ? "choose a channel that was measured; amplitude always is"
      : "choose a frame with more measured pixels",
  });
}
