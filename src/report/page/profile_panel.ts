import { fringeFigure } from "../../figures/fringe.js";
import { must, num, word, type Row } from "../../figures/rows.js";
import { styleNamed } from "../../figures/style.js";
import { wallFigure } from "../../figures/wall.js";
import { numberText } from "../../figures/scale.js";
import { current, currentFrames, frameText, withSd, type Context } from "./context.js";
import { button, figureNode, figureTable, h, numbersOf } from "./dom.js";
import type { Picked } from "./state.js";
import { PX_PER_PT } from "./spine.js";

const FLAGS: Readonly<Record<string, string>> = {
  "near-other-wall": "another wall is too near",
  "few-pixels": "too few pixels",
  "plateau-not-reached": "the signal does not reach both levels beside the wall",
  "not-converged": "the fit did not converge",
  "poor-fit": "the fit does not describe the pixels",
  curved: "the wall bends too much here",
  "no-tip": "no tip resolution is known",
};

type ProfilePick = Extract<Picked, { kind: "profile" }>;

/** The profile of a place of a wall: its pixels with the fit, its numbers, and the fringe of the stretch it lies on.
 *  Fills `box` when what it needs is unpacked; `current` tells whether it is still wanted then. */
export async function showProfile(
  context: Context,
  pick: ProfilePick,
  box: HTMLElement,
  wanted: () => boolean,
): Promise<void> {
  const c = current(context);
  const frames = currentFrames(context);
  const row = c.profile(pick.frame, pick.wall, pick.profile);
  if (row === null) return;
  const fringe = c.fringeAt(pick.frame, pick.wall, must(row, "arc_nm"));
  const [bins, fringeBins] = await Promise.all([
    frames.profileBins(pick.frame, pick.wall, pick.profile),
    fringe === null ? null : frames.fringeBins(pick.frame, pick.wall, must(fringe, "stretch")),
  ]);
  if (!wanted()) return;
  const o = { widthPt: Math.max(190, box.clientWidth / PX_PER_PT), style: styleNamed("paper") };
  const own = (c.profilesOf.get(pick.frame) ?? []).filter((r) => must(r, "wall") === pick.wall);
  const go = (by: number) => (): void => {
    const k = own.findIndex((r) => must(r, "profile") === pick.profile) + by;
    const next = own[(k + own.length) % own.length];
    context.store.set({ pinned: { ...pick, profile: must(next, "profile") } });
  };
  const parts: (Node | null)[] = [
    h("h2", {}, `Wall ${pick.wall}, profile ${pick.profile}`),
    h("p", { class: "where" }, frameText(c, pick.frame)),
    h(
      "div",
      { class: "row" },
      button("◀ along", go(-1), { "aria-label": "profile before along the wall" }),
      button("along ▶", go(1), { "aria-label": "next profile along the wall" }),
      context.store.now.frame === pick.frame
        ? null
        : button("go to its frame", () => context.store.set({ frame: pick.frame })),
    ),
    factsOf(row),
  ];
  if (bins === null)
    parts.push(
      h(
        "p",
        { class: "hint" },
        word(row, "flag") === ""
          ? "Its pixels were not kept with this analysis."
          : "No fit was kept: the flag says why.",
      ),
    );
  else {
    const figure = wallFigure({ row, ...bins }, o);
    parts.push(
      figureNode(figure),
      numbersOf("The profile in numbers", () => figureTable(figure)),
    );
  }
  if (fringe !== null) {
    parts.push(
      h("h3", {}, num(fringe, "detected") === 1 ? "Fringe of this stretch" : "No fringe on this stretch"),
      fringeFacts(fringe),
    );
    if (fringeBins !== null) {
      const figure = fringeFigure({ row: fringe, ...fringeBins }, o);
      parts.push(
        figureNode(figure),
        numbersOf("The phase in numbers", () => figureTable(figure)),
      );
    }
  }
  box.replaceChildren(...parts.filter((p) => p !== null));
}

function factsOf(r: Row): HTMLElement {
  const facts: [string, string][] = [];
  const width = num(r, "width_nm");
  const upper = num(r, "width_upper95_nm");
  if (width !== null) {
    facts.push(["width, 10–90 %", withSd(width, num(r, "width_sd_nm"), 1, "nm")]);
    const tip = num(r, "width_sd_tip_nm");
    if (tip !== null) facts.push(["tip's share of the error", `± ${numberText(tip, 1)} nm, common to all`]);
  }
  if (upper !== null)
    facts.push([width === null ? "width, upper limit" : "upper limit, 95 %", `< ${numberText(upper, 1)} nm`]);
  const seen = num(r, "apparent_width_nm");
  if (seen !== null) facts.push(["apparent width", `${numberText(seen, 1)} nm`]);
  const chi = num(r, "reduced_chi2");
  facts.push(["fit", `${chi === null ? "none" : `χ²/ν ${numberText(chi, 2)}`}, ${must(r, "pixels")} pixels`]);
  const [x, y] = [num(r, "x_nm"), num(r, "y_nm")];
  facts.push(["place", x === null || y === null ? "not placed" : `x ${numberText(x, 0)} nm, y ${numberText(y, 0)} nm`]);
  const flag = word(r, "flag");
  if (flag !== "") facts.push(["flag", FLAGS[flag] === undefined ? flag : `${flag}: ${FLAGS[flag]}`]);
  return h("dl", { class: "facts" }, ...facts.flatMap(([k, v]) => [h("dt", {}, k), h("dd", {}, v)]));
}

function fringeFacts(r: Row): HTMLElement {
  const facts: [string, string][] = [];
  const p = num(r, "adjusted_p");
  if (p !== null) facts.push(["adjusted p", p < 0.001 ? "< 0.001" : numberText(p, 3)]);
  const contrast = num(r, "contrast_rad");
  if (contrast !== null && num(r, "detected") === 1)
    facts.push([
      "contrast",
      `${withSd(contrast, num(r, "contrast_sd_rad"), 3, "rad")}, on the ${word(r, "side")} side`,
    ]);
  const period = num(r, "period_nm");
  if (period !== null) facts.push(["period", withSd(period, num(r, "period_sd_nm"), 1, "nm")]);
  const decay = num(r, "decay_nm");
  if (decay !== null) facts.push(["decay", withSd(decay, num(r, "decay_sd_nm"), 1, "nm")]);
  return h("dl", { class: "facts" }, ...facts.flatMap(([k, v]) => [h("dt", {}, k), h("dd", {}, v)]));
}
