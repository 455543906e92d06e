import { domainsFigure } from "../../figures/domains.js";
import type { Figure, Place } from "../../figures/figure.js";
import { word } from "../../figures/rows.js";
import { styleNamed } from "../../figures/style.js";
import { widthsFigure } from "../../figures/widths.js";
import { current, frameText, picked, type Context } from "./context.js";
import { figureNode, figureTable, h, numbersOf, svg } from "./dom.js";
import { nearestPlace, pointIn } from "./pointing.js";
import { PX_PER_PT } from "./spine.js";
import type { Picked } from "./state.js";

const STYLE = styleNamed("paper");
const REACH_PT = 9;

interface ChartKind {
  readonly title: string;
  readonly draw: (context: Context, widthPt: number) => Figure;
  /** What a place of the drawing stands for, and its frame. */
  readonly pickOf: (p: Place) => Picked;
  readonly says: (context: Context, p: Place) => string;
}

const WIDTHS: ChartKind = {
  title: "Wall widths",
  draw: (context, widthPt) => {
    const { frameRows, tables } = current(context);
    return widthsFigure({ frames: frameRows, walls: tables.walls }, { widthPt, style: STYLE });
  },
  pickOf: ({ keys: k }) => ({ kind: "profile", frame: k["frame"], wall: k["wall"], profile: k["profile"] }),
  says: (context, { keys: k }) =>
    `wall ${k["wall"]}, profile ${k["profile"]} of ${frameText(current(context), k["frame"])}`,
};

const DOMAINS: ChartKind = {
  title: "Domains along the run",
  draw: (context, widthPt) => {
    const { frameRows, tables } = current(context);
    const input = { frames: frameRows, domains: tables.domains, appearances: tables["domain-frames"] };
    return domainsFigure(input, { widthPt, style: STYLE });
  },
  pickOf: ({ keys: k }) => ({ kind: "domain", domain: k["domain"] }),
  says: (context, { keys: k }) => {
    const c = current(context);
    return `domain ${k["domain"]}, ${word(c.domain(k["domain"]) ?? {}, "kind")}, ${frameText(c, k["frame"])}`;
  },
};

export const widthChart = (context: Context): HTMLElement => chart(context, WIDTHS);
export const domainChart = (context: Context): HTMLElement => chart(context, DOMAINS);

/** A figure of the whole cooldown on which each thing drawn leads to its place on the map: by a click, or by arrow keys and Enter. */
function chart(context: Context, kind: ChartKind): HTMLElement {
  const { store } = context;
  const box = h("div", {
    class: "chart",
    tabindex: 0,
    role: "group",
    "aria-label": `${kind.title}: arrow keys go from sign to sign, Enter leads to its place`,
  });
  const says = h(
    "p",
    { class: "hint", role: "status", "aria-live": "polite" },
    "Point at a sign; a click leads to its place on the map.",
  );
  const numbers = h("div");
  let figure: Figure | null = null;
  let over: SVGGElement | null = null;
  let cursor: Place | null = null;
  let width = 0;

  const mark = (): void => {
    if (over === null || figure === null) return;
    const pick = picked(context);
    const mine = (figure.places ?? []).filter((p) => isPicked(kind.pickOf(p), pick));
    const ring = (p: Place, colour: string): SVGElement =>
      svg("circle", { cx: p.x, cy: p.y, r: 3.6, fill: "none", stroke: colour, "stroke-width": 1.4 });
    over.replaceChildren(
      pick?.kind === "domain" && mine.length > 1
        ? svg("path", {
            d: `M${mine.map((p) => `${p.x} ${p.y}`).join("L")}`,
            fill: "none",
            stroke: "#c8102e",
            "stroke-width": 1.6,
          })
        : svg("g"),
      ...mine
        .filter((p) => pick?.kind === "profile" || p.keys["frame"] === store.now.frame)
        .map((p) => ring(p, "#c8102e")),
      ...(cursor === null ? [] : [ring(cursor, STYLE.ink)]),
    );
  };
  const draw = (): void => {
    if (box.clientWidth === 0) return;
    width = box.clientWidth;
    cursor = null;
    figure = kind.draw(context, Math.max(200, width / PX_PER_PT));
    const node = figureNode(figure);
    over = svg("g", { "pointer-events": "none" });
    node.append(over);
    box.replaceChildren(node);
    const made = figure;
    numbers.replaceChildren(
      h("p", { class: "notes" }, made.notes.join(" ")),
      numbersOf(`${kind.title} in numbers`, () => figureTable(made)),
    );
    mark();
  };
  const lead = (p: Place): void => {
    store.set({
      frame: p.keys["frame"],
      pinned: kind.pickOf(p),
      tool: "look",
      ...(kind === WIDTHS ? { walls: true } : {}),
    });
    document.querySelector(".map-box")?.scrollIntoView({ block: "nearest" });
  };
  const look = (p: Place | null): void => {
    cursor = p;
    if (p !== null) says.replaceChildren(kind.says(context, p));
    mark();
  };
  const at = (e: PointerEvent | MouseEvent): Place | null => {
    const node = box.querySelector("svg");
    return node === null || figure === null
      ? null
      : nearestPlace(figure, pointIn(node, figure, e.clientX, e.clientY), REACH_PT);
  };
  box.addEventListener("pointermove", (e) => look(at(e)));
  box.addEventListener("pointerleave", () => look(null));
  box.addEventListener("click", (e) => {
    const p = at(e);
    if (p !== null) lead(p);
  });
  box.addEventListener("keydown", (e) => {
    const list = [...(figure?.places ?? [])].sort((a, b) => a.x - b.x || a.y - b.y);
    if (list.length === 0) return;
    const k = cursor === null ? -1 : list.findIndex((p) => p.x === cursor?.x && p.y === cursor.y);
    if (e.key === "ArrowRight" || e.key === "ArrowDown") look(list[Math.min(list.length - 1, k + 1)]);
    else if (e.key === "ArrowLeft" || e.key === "ArrowUp") look(list[Math.max(0, k < 0 ? 0 : k - 1)]);
    else if ((e.key === "Enter" || e.key === " ") && cursor !== null) lead(cursor);
    else return;
    e.preventDefault();
  });
  new ResizeObserver(() => {
    if (box.clientWidth !== width) draw();
  }).observe(box);
  store.on(["cooldown"], draw);
  store.on(["frame", "pinned", "pointed"], mark);
  return h("section", { class: "card", "aria-label": kind.title }, h("h2", {}, kind.title), box, says, numbers);
}

function isPicked(a: Picked, b: Picked | null): boolean {
  if (b === null || a.kind !== b.kind) return false;
  if (a.kind === "domain") return b.kind === "domain" && a.domain === b.domain;
  return b.kind === "profile" && a.frame === b.frame && a.wall === b.wall && a.profile === b.profile;
}
