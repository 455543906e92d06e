import { colourBar, stateKey } from "../../figures/frame_keys.js";
import { WIDTH_MAP } from "../../figures/colour_maps.js";
import { mapOf, type Shown } from "../../figures/paint.js";
import { numberText } from "../../figures/scale.js";
import { styleNamed } from "../../figures/style.js";
import { hexOf } from "../../figures/colour.js";
import { current, SHOWN, type Context } from "./context.js";
import { button, figureNode, h, on, svg } from "./dom.js";
import type { FrameMap } from "./map.js";
import type { Compare, State, Tool } from "./state.js";
import { LOOKS, widthRange, type Look } from "./wall_layer.js";
import { zoomed } from "./view.js";

const ALL: readonly Shown[] = ["amplitude", "phase", "topography", "states"];

/** A choice of few, as buttons of which one is pressed. */
function choice<T extends string>(
  label: string,
  options: readonly (readonly [T, string])[],
  take: (v: T) => void,
): { node: HTMLElement; set: (v: T) => void; enable: (v: T, on: boolean) => void } {
  const buttons = new Map(options.map(([v, name]) => [v, button(name, () => take(v))]));
  return {
    node: h("div", { class: "choice", role: "group", "aria-label": label }, ...buttons.values()),
    set: (v) => {
      for (const [k, b] of buttons) b.setAttribute("aria-pressed", String(k === v));
    },
    enable: (v, enabled) => {
      const b = buttons.get(v);
      if (b !== undefined) b.disabled = !enabled;
    },
  };
}

/** What the map shows: channels over one another, walls, both branches, and how large. */
export function layerControls(context: Context): HTMLElement {
  const { store } = context;
  const names = ALL.map((s) => [s, SHOWN[s]] as const);
  const base = choice("Show", names, (v: Shown) => store.set({ base: v }));
  const over = on(
    h(
      "select",
      { id: "over" },
      h("option", { value: "none" }, "nothing"),
      ...names.map(([v, n]) => h("option", { value: v }, n)),
    ),
    "change",
    () => store.set({ over: over.value as State["over"] }),
  );
  const mix = on(
    h("input", { type: "range", min: 0, max: 100, step: 5, id: "mix", "aria-label": "share of what is laid over" }),
    "input",
    () => store.set({ mix: Number(mix.value) / 100 }),
  );
  const walls = on(h("input", { type: "checkbox", id: "walls" }), "change", () => store.set({ walls: walls.checked }));
  const compare = choice<Compare>(
    "Branches",
    [
      ["off", "one"],
      ["split", "split"],
      ["outlines", "walls of both"],
    ],
    (v) => store.set({ compare: v }),
  );
  const tool = choice<Tool>(
    "Pointer",
    [
      ["look", "look"],
      ["measure", "measure"],
      ["mark", "mark bad"],
    ],
    (v) => store.set({ tool: v }),
  );
  store.on(["base", "over", "mix", "walls", "compare", "tool", "cooldown"], (s) => {
    const scales = current(context).index.scales;
    for (const v of ALL) base.enable(v, v === "states" || scales[v] !== undefined);
    for (const o of over.options)
      o.disabled =
        o.value !== "none" && o.value !== "states" && scales[o.value as Exclude<Shown, "states">] === undefined;
    base.set(s.base);
    over.value = s.over;
    mix.value = String(Math.round(100 * s.mix));
    mix.hidden = s.over === "none";
    walls.checked = s.walls;
    compare.set(s.compare);
    tool.set(s.tool);
  });
  return h(
    "div",
    { class: "controls" },
    h(
      "div",
      { class: "row" },
      base.node,
      h("label", { class: "choice", for: "over" }, h("span", { class: "name" }, "over it"), over),
      mix,
    ),
    h("div", { class: "row" }, tool.node, compare.node, h("label", { class: "check", for: "walls" }, walls, " walls")),
  );
}

/** Where the picture of one branch ends and that of the other begins. */
export function splitControl({ store }: Context): HTMLElement {
  const split = on(
    h("input", {
      type: "range",
      min: 2,
      max: 98,
      id: "split",
      class: "split",
      "aria-label": "where the two branches meet",
    }),
    "input",
    () => store.set({ split: Number(split.value) / 100 }),
  );
  store.on(["compare", "split"], (s) => {
    split.value = String(Math.round(100 * s.split));
    split.hidden = s.compare !== "split";
  });
  return split;
}

/** Larger, smaller, the whole field. */
export function zoomControls(map: FrameMap): HTMLElement {
  const { store } = map.context;
  const zoom = (factor: number) => (): void => {
    const p = map.projection;
    store.set({ view: zoomed(p, map.fit, factor, { xNm: p.view.xNm, yNm: p.view.yNm }) });
  };
  return h(
    "div",
    { class: "zoom choice", role: "group", "aria-label": "size of the map" },
    button("−", zoom(0.5), { "aria-label": "smaller" }),
    button("+", zoom(2), { "aria-label": "larger" }),
    button("whole", () => store.set({ view: null }), { "aria-label": "whole field" }),
  );
}

/** What colours and lines of the map mean. */
export function mapLegend(context: Context): HTMLElement {
  const box = h("div", { class: "legend" });
  context.store.on(["cooldown", "base", "over", "walls", "compare"], (s) => {
    const c = current(context);
    const shown = [s.base, ...(s.over === "none" || s.over === s.base ? [] : [s.over])];
    box.replaceChildren(
      ...shown.map((v) => channelKey(context, v)).filter((n) => n !== null),
      ...(s.walls
        ? wallKeys(
            widthRange(c),
            c.tables.fringes.some((f) => f["detected"] === 1),
          )
        : []),
    );
  });
  return box;
}

function channelKey(context: Context, shown: Shown): SVGSVGElement | null {
  const c = current(context);
  const style = styleNamed("paper");
  const o = { widthPt: 170, style };
  const common = {
    widthPt: 170,
    style,
    title: `Colours of ${SHOWN[shown]}`,
    notes: [],
    table: { columns: [], rows: [] },
  };
  if (shown === "states") return figureNode({ ...common, heightPt: 12, body: stateKey(130, 2, o) });
  const scale = c.index.scales[shown];
  if (scale === undefined) return null;
  const unit = { phase: "rad", topography: "nm", amplitude: c.info.amplitudeUnit }[shown];
  const body = colourBar(168, 2, 240, shown, unit, { ...scale, map: mapOf(shown, scale.cyclic) }, o);
  return figureNode({ ...common, heightPt: 20, body });
}

function wallKeys(range: { low: number; high: number } | null, fringes: boolean): Element[] {
  const out: Element[] = [];
  if (range !== null) {
    const steps = 40;
    const bar = svg(
      "svg",
      { viewBox: "0 0 110 10", width: 110, height: 10, "aria-hidden": "true" },
      ...Array.from({ length: steps }, (_, k) =>
        svg("rect", {
          x: (110 * k) / steps,
          y: 0,
          width: 110 / steps + 0.4,
          height: 10,
          fill: hexOf(WIDTH_MAP((k + 0.5) / steps)),
        }),
      ),
    );
    out.push(
      h("span", { class: "key" }, `width ${numberText(range.low, 0)} `, bar, ` ${numberText(range.high, 0)} nm`),
    );
  }
  const line = (look: Look, colour: string): SVGSVGElement =>
    svg(
      "svg",
      { viewBox: "0 0 34 10", width: 34, height: 10, "aria-hidden": "true" },
      svg("path", { d: "M1 5h32", stroke: "#1c1c1c", "stroke-width": LOOKS[look].width + 2, fill: "none" }),
      svg("path", {
        d: "M1 5h32",
        stroke: colour,
        "stroke-width": LOOKS[look].width,
        fill: "none",
        "stroke-dasharray": LOOKS[look].dash.join(" ") || null,
      }),
    );
  for (const look of ["sound", "limit", "flagged", "none"] as const)
    out.push(
      h(
        "span",
        { class: "key" },
        line(look, look === "sound" ? hexOf(WIDTH_MAP(0.5)) : "#ffffff"),
        ` ${LOOKS[look].means}`,
      ),
    );
  if (fringes)
    out.push(
      h(
        "span",
        { class: "key" },
        svg(
          "svg",
          { viewBox: "0 0 34 12", width: 34, height: 12, "aria-hidden": "true" },
          svg("path", { d: "M1 9h32", stroke: "#1c1c1c", "stroke-width": 3 }),
          svg("path", { d: "M6 8v-7M14 8v-7M22 8v-7M30 8v-7", stroke: "#1c1c1c", "stroke-width": 2 }),
        ),
        " strokes: a fringe, on this side",
      ),
    );
  return out;
}
