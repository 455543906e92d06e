import { CoarseImage } from "./coarse_image.js";
import { Sloped } from "./shifted.js";
import { blurredGrid, decimate, type Grid } from "./grid.js";

interface Image {
  readonly values: Float32Array;
  readonly usable: Uint8Array;
}

/** One image blurred for registration, and its coarser copies. */
export class Pyramid {
  readonly grid: Grid;
  /** Whole pixels of the grid. */
  readonly whole: number;
  private readonly slopes = new Map<number, Sloped>();
  private readonly levels = new Map<number, CoarseImage>();

  constructor(
    image: Image,
    rows: number,
    cols: number,
    readonly sigmaXPx: number,
    readonly sigmaYPx: number,
  ) {
    this.grid = blurredGrid(image, rows, cols, sigmaXPx, sigmaYPx);
    let whole = 0;
    for (const k of this.grid.known) if (k === 2) whole++;
    this.whole = whole;
  }

  /** The grid, or its coarser copy, with its gradients. */
  sloped(factor: number): Sloped {
    let found = this.slopes.get(factor);
    if (found === undefined) {
      found = new Sloped(factor === 1 ? this.grid : this.coarse(factor).grid);
      this.slopes.set(factor, found);
    }
    return found;
  }

  coarse(factor: number): CoarseImage {
    let level = this.levels.get(factor);
    if (level === undefined) {
      level = new CoarseImage(decimate(this.grid, factor));
      this.levels.set(factor, level);
    }
    return level;
  }
}

/** An image takes part in several pairs one after the other, with one or two partners' blurs: what was computed from it lives as long as it does. Only a
 *  saving of time; the answer is the same. */
const known = new WeakMap<Float32Array, Pyramid[]>();
const BLURS_KEPT = 2;

export function pyramidOf(image: Image, rows: number, cols: number, sigmaXPx: number, sigmaYPx: number): Pyramid {
  const kept = known.get(image.values) ?? [];
  const found = kept.find((p) => p.sigmaXPx === sigmaXPx && p.sigmaYPx === sigmaYPx);
  if (found !== undefined) return found;
  const pyramid = new Pyramid(image, rows, cols, sigmaXPx, sigmaYPx);
  known.set(image.values, [pyramid, ...kept].slice(0, BLURS_KEPT));
  return pyramid;
}
