import type { Figure, Place } from "../../figures/figure.js";

/** A place of the screen in points of a drawing. */
export function pointIn(
  node: SVGSVGElement,
  figure: Figure,
  clientX: number,
  clientY: number,
): { x: number; y: number } {
  const r = node.getBoundingClientRect();
  return {
    x: ((clientX - r.left) / r.width) * figure.widthPt,
    y: ((clientY - r.top) / r.height) * figure.heightPt,
  };
}

/** The thing drawn nearest to a point, at most so far from it. */
export function nearestPlace(figure: Figure, at: { x: number; y: number }, reachPt = Infinity): Place | null {
  let best: Place | null = null;
  let bestOff = reachPt * reachPt;
  for (const p of figure.places ?? []) {
    const off = (p.x - at.x) ** 2 + (p.y - at.y) ** 2;
    if (off > bestOff) continue;
    best = p;
    bestOff = off;
  }
  return best;
}
