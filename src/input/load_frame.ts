import type { ChannelSource, Cooldown, FrameInfo, RawFrame } from "../model/cooldown.js";
import { InputError } from "../model/errors.js";
import { makeRaster, type Raster } from "../model/raster.js";
import { ImageFileError } from "./byte_file.js";
import { imageProblem } from "./check_images.js";
import { withImage } from "./image_file.js";

/**
 * Reads the images of one frame: topography in nm, amplitude as stored, phase in rad; row-major [rows, columns], NaN where the file has
 * NaN. A topography or phase without two different values (nothing measured, or a filled-in constant) counts as missing (null). Runs in any thread. Throws InputError
 * where a file has gone, is damaged, or is not what its header said when the cooldown was read.
 */
export async function loadFrame(cooldown: Pick<Cooldown, "pixel">, info: FrameInfo): Promise<RawFrame> {
  const load = async (s: ChannelSource): Promise<Raster> =>
    makeRaster(await readSource(s, info), info.rows, info.cols, cooldown.pixel);
  const loadOptional = async (s: ChannelSource | undefined): Promise<Raster | null> => {
    if (s === undefined) return null;
    const raster = await load(s);
    return hasImage(raster.values.data) ? raster : null;
  };
  return {
    frame: info.frame,
    topography: await loadOptional(info.sources.topography),
    amplitude: await load(info.sources.amplitude),
    phase: await loadOptional(info.sources.phase),
  };
}

async function readSource(s: ChannelSource, info: FrameInfo): Promise<Float32Array> {
  try {
    return await withImage(s.file, (image) => {
      const page = image.pages[s.page];
      if (page === undefined || page.rows !== info.rows || page.cols !== info.cols) {
        const found = page === undefined ? "no such page any more" : `now ${page.cols} × ${page.rows} pixels`;
        throw new ImageFileError(`${found}: the file changed while it was read`, "run again when it is written");
      }
      return image.read(s.page, s.scale);
    });
  } catch (e) {
    if (e instanceof ImageFileError) throw new InputError(imageProblem(e, s.label), e);
    throw e;
  }
}

function hasImage(data: Float32Array): boolean {
  const first = data.find((v) => !Number.isNaN(v));
  return first !== undefined && data.some((v) => v !== first && !Number.isNaN(v));
}
