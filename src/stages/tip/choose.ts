import { chi2OfNothing, type ShapeFit } from "./fit_shape.js";
import { bic, fitEdge, fitParticle, type Extent, type ParticleFit } from "./models.js";
import { type CutPixels, type LineFrame, pixelsAlong } from "./pixels.js";
import type { CutLine, TipImage, TipModel } from "./types.js";

/** The model that the pixels ask for. */
export interface Choice {
  readonly model: TipModel;
  readonly fit: ShapeFit;
  readonly particle: ParticleFit | null;
  readonly data: CutPixels;
  readonly extent: Extent;
  /** BIC less that of the chosen model, on the pixels beside the line. */
  readonly evidence: Partial<Record<TipModel | "nothing", number>>;
}

export interface ChooseOptions {
  /** Only this kind of feature; null: whichever the evidence prefers. */
  readonly model: "edge" | "particle" | null;
  /** The particle's own diameter or width where it is known, nm. */
  readonly sizeNm: number | null;
}

/** Fits an edge, a bar and a dot to the pixels beside the line and takes the one with the least BIC; a dot is then fitted again to the
 *  pixels of both lines, the one given and the one across it. Null: no model could be fitted. */
export function chooseModel(
  image: TipImage,
  frame: LineFrame,
  line: CutLine,
  strip: CutPixels,
  options: ChooseOptions,
): Choice | null {
  const { pixel } = image;
  const pitchNm = Math.hypot(frame.ux * pixel.xNm, frame.uy * pixel.yNm);
  const extent: Extent = { lengthNm: frame.lengthNm, widthNm: line.widthNm, pitchNm };
  const edge = options.model === "particle" ? null : fitEdge(strip, extent);
  const wanted = options.model !== "edge";
  const bar = wanted ? fitParticle(strip, extent, "bar", options.sizeNm) : null;
  const dot = wanted ? fitParticle(strip, extent, "dot", options.sizeNm) : null;
  const fits: { model: TipModel; fit: ShapeFit; particle: ParticleFit | null }[] = [];
  if (edge !== null && edge.converged) fits.push({ model: "edge", fit: edge, particle: null });
  if (bar !== null) fits.push({ model: "bar", fit: bar.best, particle: bar });
  if (dot !== null) fits.push({ model: "dot", fit: dot.best, particle: dot });
  if (fits.length === 0) return null;
  const scale = Math.max(1, Math.min(...fits.map((f) => f.fit.chi2 / f.fit.dof)));
  const scores = fits.map((f) => bic(f.fit, strip, scale));
  const least = Math.min(...scores);
  const best = fits[scores.indexOf(least)];
  const parameters = 3 * strip.y.length;
  const nothing = chi2OfNothing(strip, "plane") / scale + parameters * Math.log(strip.n * strip.y.length);
  const evidence: Choice["evidence"] = {
    nothing: nothing - least,
    ...Object.fromEntries(fits.map((f, k) => [f.model, scores[k] - least])),
  };
  if (best.model === "dot") {
    const crossed = pixelsAlong(image, frame, line.widthNm, true);
    const again = fitParticle(crossed, extent, "dot", options.sizeNm, best.fit.theta);
    if (again !== null) return { ...best, fit: again.best, particle: again, data: crossed, extent, evidence };
  }
  return { ...best, data: strip, extent, evidence };
}
