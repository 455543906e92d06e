import type { CleanFrame } from "../../model/signal.js";
import { colsOf, dataOf, rowsOf, type PixelSize } from "../../model/raster.js";

/** The complex near-field signal z = amplitude · exp(i·phase) of one frame, row-major. Without an optical phase `im` is all 0. */
export interface Pixels {
  readonly rows: number;
  readonly cols: number;
  readonly pixel: PixelSize;
  readonly re: Float32Array;
  readonly im: Float32Array;
  readonly hasPhase: boolean;
  /** 1 = measured in every channel used, no scar, no debris. */
  readonly usable: Uint8Array;
  readonly count: number;
}

/** What is taken off a frame on top of its cleaning: z · exp(−(g_row + slope·x)) · exp(−i·phase_row), x from −½ to ½ over the columns. */
export interface RowCorrection {
  readonly logGain: Float32Array;
  readonly phaseRad: Float32Array;
  /** Change of the logarithm of the gain from the first to the last column. */
  readonly columnLogGain: number;
  readonly columnPhaseRad: number;
}

export function noCorrection(rows: number): RowCorrection {
  return {
    logGain: new Float32Array(rows),
    phaseRad: new Float32Array(rows),
    columnLogGain: 0,
    columnPhaseRad: 0,
  };
}

/** What `debris` calls a pixel whose state cannot be trusted. */
const DEBRIS_CORE = 1;

/** Gain and phase that a correction takes off each row and each column: factors, and angles in rad. */
function partsOf(
  correction: RowCorrection,
  cols: number,
): {
  readonly rowGain: Float64Array;
  readonly columnGain: Float64Array;
  readonly columnRad: Float64Array;
} {
  const place = (j: number): number => (j + 0.5) / cols - 0.5;
  return {
    rowGain: Float64Array.from(correction.logGain, (g) => Math.exp(-g)),
    columnGain: Float64Array.from({ length: cols }, (_, j) => Math.exp(-correction.columnLogGain * place(j))),
    columnRad: Float64Array.from({ length: cols }, (_, j) => correction.columnPhaseRad * place(j)),
  };
}

/** z of every usable pixel of a clean frame. Unusable pixels hold 0.
 *  @param debris 0 free, 1 core, 2 disturbed around it, the frame's shape; null = none known
 *  @param marginToo whether what is only disturbed is left out as well
 *  @param correction taken off; null = none */
export function readPixels(
  clean: CleanFrame,
  debris: Uint8Array | null,
  marginToo = true,
  correction: RowCorrection | null = null,
): Pixels {
  const rows = rowsOf(clean.amplitude);
  const cols = colsOf(clean.amplitude);
  const n = rows * cols;
  if (debris !== null && debris.length !== n) {
    throw new RangeError(`debris of ${debris.length} values for ${rows} × ${cols} pixels`);
  }
  const off = correction ?? noCorrection(rows);
  const { rowGain, columnGain, columnRad } = partsOf(off, cols);
  const amplitude = dataOf(clean.amplitude);
  const phase = clean.phase === null ? null : dataOf(clean.phase);
  const re = new Float32Array(n);
  const im = new Float32Array(n);
  const usable = new Uint8Array(n);
  let count = 0;
  for (let i = 0, p = 0; i < rows; i++) {
    const gain = rowGain[i];
    const rad = off.phaseRad[i];
    for (let j = 0; j < cols; j++, p++) {
      // not finite where either channel is not
      const angle = phase === null ? 0 : phase[p] - rad - columnRad[j];
      const a = amplitude[p] * gain * columnGain[j];
      if (!Number.isFinite(a + angle)) continue;
      if (debris !== null && (debris[p] === DEBRIS_CORE || (marginToo && debris[p] !== 0))) continue;
      re[p] = phase === null ? a : a * Math.cos(angle);
      im[p] = phase === null ? 0 : a * Math.sin(angle);
      usable[p] = 1;
      count++;
    }
  }
  return { rows, cols, pixel: clean.pixel, re, im, hasPhase: phase !== null, usable, count };
}

/** The pixels with `correction` taken off; new arrays for the signal, the same mask. */
export function correctPixels(pixels: Pixels, correction: RowCorrection): Pixels {
  const { rows, cols } = pixels;
  const re = new Float32Array(pixels.re.length);
  const im = new Float32Array(pixels.im.length);
  const { rowGain, columnGain, columnRad } = partsOf(correction, cols);
  const columnRe = columnGain.map((g, j) => g * Math.cos(columnRad[j]));
  const columnIm = columnGain.map((g, j) => -g * Math.sin(columnRad[j]));
  for (let i = 0; i < rows; i++) {
    const c = rowGain[i] * Math.cos(correction.phaseRad[i]);
    const s = -rowGain[i] * Math.sin(correction.phaseRad[i]);
    for (let j = 0, p = i * cols; j < cols; j++, p++) {
      const fr = c * columnRe[j] - s * columnIm[j];
      const fi = c * columnIm[j] + s * columnRe[j];
      const a = pixels.re[p];
      const b = pixels.im[p];
      re[p] = a * fr - b * fi;
      im[p] = a * fi + b * fr;
    }
  }
  return { ...pixels, re, im };
}
