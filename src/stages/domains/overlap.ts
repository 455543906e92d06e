import type { FrameDomains } from "../../model/domains.js";
import type { PixelSize } from "../../model/raster.js";
import { NO_STATE, type Drift } from "../../model/signal.js";
import type { DomainSettings } from "./settings.js";

/** Regions `a` and `b` of two frames taken for the same piece of sample. */
export interface Link {
  readonly a: number;
  readonly b: number;
  readonly pixels: number;
}

export interface PairOverlap {
  readonly links: readonly Link[];
  /** Per label of the one frame: 1 where part of the region lies outside the field of the other frame, or too much of it under its gaps. */
  readonly hiddenA: Uint8Array;
  readonly hiddenB: Uint8Array;
}

/** Position of a frame's pixel (0, 0) in the cooldown's coordinates. */
export interface Placed {
  readonly xNm: number;
  readonly yNm: number;
  readonly sdNm: number;
}

/** null where the frame could not be placed. */
export function placedAt(drift: Drift): Placed | null {
  if (drift.xNm === null || drift.yNm === null) return null;
  return { xNm: drift.xNm, yNm: drift.yNm, sdNm: drift.sdNm ?? 0 };
}

/** What to add to a pixel's row and column in frame `b` for the nearest pixel of frame `a`. */
export function pixelShift(
  atA: Placed,
  atB: Placed,
  pixel: PixelSize,
): { readonly rows: number; readonly cols: number } {
  return {
    rows: Math.round((atB.yNm - atA.yNm) / pixel.yNm),
    cols: Math.round((atB.xNm - atA.xNm) / pixel.xNm),
  };
}

/** Share of a region that may lie under the other frame's unmeasured pixels before its coming or going counts as unseen. */
const HIDDEN_SHARE = 0.25;
/** A region this near (in pixels) to the edge of the other frame's field may have come from beyond it. */
const EDGE_PX = 1;

/** Which regions of two frames overlap on the sample, with nearest-pixel mapping between the frames' own grids (no map is resampled
 *  twice, none is interpolated). Two regions of one state are linked where they share `overlapShare` of the smaller one, or where
 *  more than `coreOverlapPixels` shared pixels lie deeper inside `b` than misregistration and pixel rounding reach: domains that
 *  only touch because a frame is misplaced are not linked, domains that have moved are. */
export function overlapOf(a: FrameDomains, b: FrameDomains, atA: Placed, atB: Placed, s: DomainSettings): PairOverlap {
  const px = b.map.pixel;
  const sdNm = Math.hypot(atA.sdNm, atB.sdNm);
  const core = coreOf(
    b,
    Math.ceil(0.5 + (s.bandSds * sdNm) / px.xNm - 1e-9),
    Math.ceil(0.5 + (s.bandSds * sdNm) / px.yNm - 1e-9),
  );
  const { rows: shiftRows, cols: shiftCols } = pixelShift(atA, atB, px);

  const nb = b.regions.length + 1;
  const shared = new Map<number, { pixels: number; core: number }>();
  const kindA = [0, ...a.regions.map((r) => (r.kind === "metallic" ? 1 : 2))];
  const kindB = [0, ...b.regions.map((r) => (r.kind === "metallic" ? 1 : 2))];
  const { rows, cols } = b.map;
  for (let i = 0; i < rows; i++) {
    const ia = i + shiftRows;
    if (ia < 0 || ia >= a.map.rows) continue;
    const from = Math.max(0, -shiftCols);
    const to = Math.min(cols, a.map.cols - shiftCols);
    for (let j = from; j < to; j++) {
      const p = i * cols + j;
      const lb = b.labels[p];
      if (lb === 0) continue;
      const la = a.labels[ia * a.map.cols + j + shiftCols];
      if (la === 0 || kindA[la] !== kindB[lb]) continue;
      const key = la * nb + lb;
      let entry = shared.get(key);
      if (entry === undefined) shared.set(key, (entry = { pixels: 0, core: 0 }));
      entry.pixels++;
      entry.core += core[p];
    }
  }
  const cell = px.xNm * px.yNm;
  const links: Link[] = [];
  for (const [key, { pixels, core }] of shared) {
    const la = Math.floor(key / nb);
    const lb = key % nb;
    const smaller = Math.min(a.regions[la - 1].areaNm2, b.regions[lb - 1].areaNm2) / cell;
    if (pixels >= s.overlapShare * smaller || core > s.coreOverlapPixels) links.push({ a: la, b: lb, pixels });
  }
  links.sort((p, q) => p.a - q.a || p.b - q.b);
  return {
    links,
    hiddenA: hiddenIn(a, b, -shiftRows, -shiftCols),
    hiddenB: hiddenIn(b, a, shiftRows, shiftCols),
  };
}

/** 1 where every pixel within `rx`, `ry` pixels carries the same label (beyond the image's edge counts as the same). */
function coreOf(f: FrameDomains, rx: number, ry: number): Uint8Array {
  const { rows, cols } = f.map;
  const l = f.labels;
  const flat = new Uint8Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const here = l[i * cols + j];
      let same = here !== 0;
      for (let k = Math.max(0, j - rx); same && k <= Math.min(cols - 1, j + rx); k++) same = l[i * cols + k] === here;
      flat[i * cols + j] = same ? 1 : 0;
    }
  }
  const out = new Uint8Array(rows * cols);
  for (let i = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++) {
      const here = l[i * cols + j];
      let same = here !== 0;
      for (let k = Math.max(0, i - ry); same && k <= Math.min(rows - 1, i + ry); k++)
        same = flat[k * cols + j] === 1 && l[k * cols + j] === here;
      out[i * cols + j] = same ? 1 : 0;
    }
  }
  return out;
}

function hiddenIn(of: FrameDomains, other: FrameDomains, shiftRows: number, shiftCols: number): Uint8Array {
  const count = of.regions.length + 1;
  const total = new Int32Array(count);
  const unseen = new Int32Array(count);
  const hidden = new Uint8Array(count);
  const { rows, cols } = of.map;
  for (let i = 0, p = 0; i < rows; i++) {
    const io = i + shiftRows;
    const rowOut = io < EDGE_PX || io >= other.map.rows - EDGE_PX;
    for (let j = 0; j < cols; j++, p++) {
      const label = of.labels[p];
      if (label === 0) continue;
      total[label]++;
      const jo = j + shiftCols;
      if (rowOut || jo < EDGE_PX || jo >= other.map.cols - EDGE_PX) hidden[label] = 1;
      else if (other.map.states[io * other.map.cols + jo] === NO_STATE) unseen[label]++;
    }
  }
  for (let label = 1; label < count; label++) if (unseen[label] > HIDDEN_SHARE * total[label]) hidden[label] = 1;
  return hidden;
}
