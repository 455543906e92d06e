import { must } from "../../figures/rows.js";
import type { Cooldown } from "./cooldown.js";
import type { MapView, Point } from "./state.js";

export interface Rect {
  readonly x0Nm: number;
  readonly y0Nm: number;
  readonly x1Nm: number;
  readonly y1Nm: number;
}

/** The rectangle that a frame's pixels cover, edges included. A frame that was not placed is drawn where the first one lies. */
export function frameRect(c: Cooldown, frame: number): Rect {
  const d = c.drift(frame) ?? { xNm: 0, yNm: 0 };
  const { rows, cols } = c.head(frame);
  const { pixelXNm, pixelYNm } = c.info;
  return {
    x0Nm: d.xNm - pixelXNm / 2,
    y0Nm: d.yNm - pixelYNm / 2,
    x1Nm: d.xNm + (cols - 0.5) * pixelXNm,
    y1Nm: d.yNm + (rows - 0.5) * pixelYNm,
  };
}

/** What holds every frame. */
export function wholeField(c: Cooldown): Rect {
  return c.frameRows
    .map((r) => frameRect(c, must(r, "frame")))
    .reduce((a, b) => ({
      x0Nm: Math.min(a.x0Nm, b.x0Nm),
      y0Nm: Math.min(a.y0Nm, b.y0Nm),
      x1Nm: Math.max(a.x1Nm, b.x1Nm),
      y1Nm: Math.max(a.y1Nm, b.y1Nm),
    }));
}

export function fittedView(field: Rect, width: number, height: number): MapView {
  return {
    xNm: (field.x0Nm + field.x1Nm) / 2,
    yNm: (field.y0Nm + field.y1Nm) / 2,
    nmPerPx: Math.max((field.x1Nm - field.x0Nm) / width, (field.y1Nm - field.y0Nm) / height),
  };
}

/** Between nm of the cooldown and CSS pixels of the map. */
export class Projection {
  constructor(
    readonly view: MapView,
    readonly width: number,
    readonly height: number,
  ) {}

  x(nm: number): number {
    return (nm - this.view.xNm) / this.view.nmPerPx + this.width / 2;
  }

  y(nm: number): number {
    return (nm - this.view.yNm) / this.view.nmPerPx + this.height / 2;
  }

  point(x: number, y: number): Point {
    return {
      xNm: (x - this.width / 2) * this.view.nmPerPx + this.view.xNm,
      yNm: (y - this.height / 2) * this.view.nmPerPx + this.view.yNm,
    };
  }
}

/** The view made larger or smaller about a point that stays where it is; never smaller than the whole field (null). */
export function zoomed(p: Projection, fit: MapView, factor: number, about: Point): MapView | null {
  const nmPerPx = Math.max(fit.nmPerPx / 40, p.view.nmPerPx / factor);
  if (nmPerPx >= fit.nmPerPx * 0.999) return null;
  const f = nmPerPx / p.view.nmPerPx;
  return { xNm: about.xNm + (p.view.xNm - about.xNm) * f, yNm: about.yNm + (p.view.yNm - about.yNm) * f, nmPerPx };
}
