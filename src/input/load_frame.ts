import type {
  ChannelName,
  ChannelSource,
  Cooldown,
  FrameInfo,
  ImagePlace,
  Notice,
  RawFrame,
} from "../model/cooldown.js";
import { InputError } from "../model/errors.js";
import { makeRaster, type PixelSize, type Raster } from "../model/raster.js";
import { plainText } from "../model/text.js";
import { ImageFileError } from "./byte_file.js";
import { imageProblem } from "./image_headers.js";
import { withImage } from "./image_file.js";
import { joinRetrace } from "./retrace.js";

/**
 * Reads the images of one frame: topography in nm, amplitude as stored, phase in rad; row-major [rows, columns], NaN where the file has
 * NaN and where the user leaves pixels out. A complex signal becomes modulus and argument; a retrace is averaged with its trace.
 * A topography or phase without two different values (nothing measured, or a filled-in constant) counts as missing (null). Runs in
 * any thread. Throws InputError where a file has gone, is damaged, or is not what its header said when the cooldown was read.
 */
export async function loadFrame(cooldown: Pick<Cooldown, "pixel">, info: FrameInfo): Promise<RawFrame> {
  const notices: Notice[] = [];
  const retraceNoise: Partial<Record<ChannelName, number>> = {};
  const read = placeReader(info);
  const load = async (channel: ChannelName, s: ChannelSource): Promise<Raster> => {
    const data = s.complex === undefined ? await read(s, s.scale) : await readComplex(s, read);
    if (s.retrace !== undefined) {
      const joined = joinRetrace(data, await read(s.retrace, s.scale), info.cols, channel === "phase");
      if (joined.noiseSd !== null) retraceNoise[channel] = joined.noiseSd;
      if (joined.disagreement !== null) {
        const label = plainText(s.label);
        const message = `${channel} (${label}): ${joined.disagreement}`;
        const varies = [label, ...(joined.disagreement.match(/-?\d+(?:\.\d+)?/g) ?? [])];
        notices.push({ frame: info.frame, code: "retrace-differs", message, varies });
      }
    }
    leaveOut(data, info, cooldown.pixel);
    return makeRaster(data, info.rows, info.cols, cooldown.pixel);
  };
  const loadOptional = async (channel: ChannelName): Promise<Raster | null> => {
    const s = info.sources[channel];
    if (s === undefined) return null;
    const raster = await load(channel, s);
    return hasImage(raster.values.data) ? raster : null;
  };
  return {
    frame: info.frame,
    topography: await loadOptional("topography"),
    amplitude: await load("amplitude", info.sources.amplitude),
    phase: await loadOptional("phase"),
    retraceNoise,
    notices,
  };
}

type PlaceReader = (s: ImagePlace, scale: number, plane?: number) => Promise<Float32Array>;

function placeReader(info: FrameInfo): PlaceReader {
  return async (s, scale, plane = s.sample) => {
    try {
      return await withImage(
        s.file,
        (image) => {
          const page = image.pages[s.page];
          if (page === undefined || page.rows !== info.rows || page.cols !== info.cols) {
            const found = page === undefined ? "no such page any more" : `now ${page.cols} × ${page.rows} pixels`;
            throw new ImageFileError(`${found}: the file changed while it was read`, "run again when it is written");
          }
          return image.read(s.page, scale, plane);
        },
        s.dataset ?? null,
      );
    } catch (e) {
      if (e instanceof ImageFileError) throw new InputError(imageProblem(e, s.label), e);
      throw e;
    }
  };
}

/** Modulus or argument (rad, in (−π, π]) of complex numbers, or of a real and an imaginary image; NaN where either is. */
async function readComplex(s: ChannelSource, read: PlaceReader): Promise<Float32Array> {
  const re = s.imaginary === undefined ? await read(s, 1, 0) : await read(s, 1);
  const im = s.imaginary === undefined ? await read(s, 1, 1) : await read(s.imaginary, 1);
  for (let k = 0; k < re.length; k++) {
    re[k] = s.complex === "argument" ? Math.atan2(im[k], re[k]) : Math.hypot(re[k], im[k]);
  }
  return re;
}

/** Pixels whose centre lies in a region that the user leaves out, edges included, or all of them, become NaN. */
function leaveOut(data: Float32Array, info: FrameInfo, pixel: PixelSize): void {
  if (info.excluded !== undefined) data.fill(NaN);
  for (const r of info.excludedRegions ?? []) {
    const [firstCol, lastCol] = within(r.x0Nm / pixel.xNm, r.x1Nm / pixel.xNm, info.cols);
    const [firstRow, lastRow] = within(r.y0Nm / pixel.yNm, r.y1Nm / pixel.yNm, info.rows);
    for (let i = firstRow; i <= lastRow; i++) data.fill(NaN, i * info.cols + firstCol, i * info.cols + lastCol + 1);
  }
}

/** Whole numbers from `low` to `high` among 0 … count − 1; a part in 10⁹ of a pixel is rounding. */
function within(low: number, high: number, count: number): [number, number] {
  return [Math.max(0, Math.ceil(low - 1e-9)), Math.min(count - 1, Math.floor(high + 1e-9))];
}

function hasImage(data: Float32Array): boolean {
  const first = data.find((v) => !Number.isNaN(v));
  return first !== undefined && data.some((v) => v !== first && !Number.isNaN(v));
}
