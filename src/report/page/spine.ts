import type { Figure, Place } from "../../figures/figure.js";
import { loopFigure } from "../../figures/loop.js";
import { must, word } from "../../figures/rows.js";
import { styleNamed } from "../../figures/style.js";
import { unfold } from "../../figures/unfold.js";
import { current, fractionText, frameText, kelvin, picked, type Context } from "./context.js";
import { button, figureNode, figureTable, h, numbersOf, on, svg } from "./dom.js";
import { nearestPlace, pointIn } from "./pointing.js";
import { stepTo } from "./map_input.js";

const STYLE = styleNamed("paper");
/** CSS pixels a point of the drawing, so that its text can be read on a screen. */
export const PX_PER_PT = 1.65;

/** The loop and, below it, every frame in the order of the run: both lead to the frame that is pointed at, and together they are one slider. */
export class Spine {
  readonly node: HTMLElement;
  private readonly slider = h("div", {
    class: "spine",
    role: "slider",
    tabindex: 0,
    "aria-label": "temperature along the loop",
  });
  private readonly plot = h("div", { class: "plot" });
  private readonly rail = h("div", { class: "rail" });
  private readonly numbers = h("div");
  private figure: Figure | null = null;
  private cursor: SVGGElement | null = null;
  private width = 0;

  constructor(private readonly context: Context) {
    const { store, cooldowns } = context;
    this.slider.append(this.plot, this.rail);
    const several = cooldowns.length > 1;
    const all = on(h("input", { type: "checkbox", id: "all-loops" }), "change", () =>
      store.set({ allLoops: all.checked }),
    );
    this.node = h(
      "section",
      { class: "card spine-card", "aria-label": "loop" },
      this.slider,
      h(
        "div",
        { class: "row steps" },
        button("◀", () => stepTo(context, store.now.frame - 1), { "aria-label": "frame before" }),
        button("▶", () => stepTo(context, store.now.frame + 1), { "aria-label": "next frame" }),
        button("other branch", () => this.cross(), {
          title: "the frame of the other branch nearest in temperature (↑ or ↓)",
        }),
        several ? h("label", { for: "all-loops" }, all, " all loops together") : null,
      ),
      this.numbers,
    );
    this.take(this.plot, (x, y) => this.pointedInPlot(x, y));
    this.take(this.rail, (x) => this.pointedOnRail(x));
    this.slider.addEventListener("keydown", (e) => this.key(e));
    new ResizeObserver(() => {
      if (this.plot.clientWidth !== this.width) this.draw();
    }).observe(this.plot);
    store.on(["cooldown", "allLoops"], () => this.draw());
    store.on(["cooldown", "frame", "compare", "pinned", "pointed"], () => this.mark());
  }

  /** Arrow keys go along the run, up and down over to the other branch. True where the key was one of these. */
  key(e: KeyboardEvent): boolean {
    const { frame } = this.context.store.now;
    const last = current(this.context).frameRows.length - 1;
    const to: Readonly<Record<string, number>> = {
      ArrowLeft: frame - 1,
      ArrowRight: frame + 1,
      PageUp: frame - 5,
      PageDown: frame + 5,
      Home: 0,
      End: last,
    };
    if (e.ctrlKey || e.metaKey || e.altKey) return false;
    if (e.key === "ArrowUp" || e.key === "ArrowDown") this.cross();
    else if (e.key in to) stepTo(this.context, to[e.key]);
    else return false;
    e.preventDefault();
    return true;
  }

  private cross(): void {
    const other = current(this.context).opposite(this.context.store.now.frame);
    if (other !== null) stepTo(this.context, other);
  }

  private draw(): void {
    const { cooldowns, store } = this.context;
    const shown = store.now.allLoops ? cooldowns : [current(this.context)];
    this.width = this.plot.clientWidth;
    this.figure = loopFigure(
      { frames: shown.flatMap((c) => c.frameRows), loops: shown.flatMap((c) => c.tables.loops) },
      { widthPt: Math.max(180, this.width / PX_PER_PT), style: STYLE },
    );
    const node = figureNode(this.figure);
    this.cursor = svg("g", { class: "cursor", "pointer-events": "none" });
    node.append(this.cursor);
    this.plot.replaceChildren(node);
    const figure = this.figure;
    this.numbers.replaceChildren(numbersOf("The loop in numbers", () => figureTable(figure)));
    this.mark();
  }

  private place(frame: number | null): Place | undefined {
    const { cooldown, allLoops } = this.context.store.now;
    const which = allLoops ? cooldown : 0;
    return this.figure?.places?.find((p) => p.keys["frame"] === frame && p.keys["cooldown"] === which);
  }

  private mark(): void {
    const c = current(this.context);
    const { frame, compare } = this.context.store.now;
    const other = compare === "off" ? null : c.opposite(frame);
    const pick = picked(this.context);
    const with_ = pick?.kind === "domain" ? (c.appearancesOf.get(pick.domain) ?? []).map((r) => must(r, "frame")) : [];
    const ring = (f: number | null, r: number, look: Record<string, string | number>): SVGElement | null => {
      const p = this.place(f);
      return p === undefined ? null : svg("circle", { cx: p.x, cy: p.y, r, fill: "none", ...look });
    };
    const parts = [
      ...with_.map((f) => ring(f, 3.6, { stroke: STYLE.ink, "stroke-width": 0.9 })),
      ring(other, 5.2, { stroke: "#c8102e", "stroke-width": 1.2, "stroke-dasharray": "2 1.4" }),
      ring(frame, 5.2, { stroke: "#c8102e", "stroke-width": 1.8 }),
    ];
    this.cursor?.replaceChildren(...parts.filter((p) => p !== null));
    this.drawRail(with_, other);
    const s = this.slider;
    s.setAttribute("aria-valuemin", "0");
    s.setAttribute("aria-valuemax", String(c.frameRows.length - 1));
    s.setAttribute("aria-valuenow", String(frame));
    s.setAttribute("aria-valuetext", `${frameText(c, frame)}, metallic fraction ${fractionText(c, frame)}`);
  }

  private drawRail(with_: readonly number[], other: number | null): void {
    const c = current(this.context);
    const { frame } = this.context.store.now;
    const run = unfold(c.frameRows);
    const wide = Math.max(200, this.rail.clientWidth);
    const x = (f: number): number => 10 + ((run.at.get(f) ?? 0) / run.length) * (wide - 20);
    const left = new Set(c.info.exclusions.filter((e) => e.regionNm === null).map((e) => e.frame));
    const ticks = c.frameRows.map((r) => {
      const f = must(r, "frame");
      const colour = STYLE.series[word(r, "branch") === "cooling" ? 0 : 1];
      const at = x(f);
      if (left.has(f)) return svg("path", { d: `M${at - 3} 13l6 6m0 -6l-6 6`, stroke: STYLE.ink, "stroke-width": 1.4 });
      if (word(r, "flag") !== "")
        return svg("circle", { cx: at, cy: 16, r: 3, fill: "#fff", stroke: STYLE.ink, "stroke-width": 1.2 });
      return svg("path", { d: `M${at} 10v12`, stroke: colour, "stroke-width": 2.4 });
    });
    const texts = run.series.map((s, k) => {
      const from = 10 + (s.from / run.length) * (wide - 20);
      const to = 10 + (s.to / run.length) * (wide - 20);
      const name = `${s.branch} ${Number(s.fromK.toFixed(1))} → ${kelvin(s.toK)}`;
      return svg(
        "text",
        {
          x: k === 0 ? from - 6 : to + 6,
          y: 40,
          "font-size": 11,
          fill: STYLE.ink,
          "text-anchor": k === 0 ? "start" : "end",
        },
        run.series.length <= 2 ? name : k === 0 || k === run.series.length - 1 ? s.branch : "",
      );
    });
    this.rail.replaceChildren(
      svg(
        "svg",
        { viewBox: `0 0 ${wide} 46`, width: "100%", height: 46, "aria-hidden": "true", "font-family": STYLE.font },
        svg("path", { d: `M6 16H${wide - 6}`, stroke: "#d9d6cd", "stroke-width": 1 }),
        ...ticks,
        ...with_.map((f) => svg("path", { d: `M${x(f) - 3} 26h6`, stroke: STYLE.ink, "stroke-width": 2 })),
        other === null
          ? null
          : svg("path", { d: `M${x(other)} 5v22`, stroke: "#c8102e", "stroke-width": 1.4, "stroke-dasharray": "3 2" }),
        svg("path", {
          d: `M${x(frame)} 3v26M${x(frame) - 5} 3h10l-5 6z`,
          stroke: "#c8102e",
          fill: "#c8102e",
          "stroke-width": 2,
        }),
        ...texts,
      ),
    );
  }

  private pointedInPlot(clientX: number, clientY: number): void {
    const node = this.plot.querySelector("svg");
    const figure = this.figure;
    if (node === null || figure === null) return;
    const { store, cooldowns } = this.context;
    const p = nearestPlace(figure, pointIn(node, figure, clientX, clientY));
    if (p === null) return;
    const cooldown = store.now.allLoops ? p.keys["cooldown"] : store.now.cooldown;
    if (cooldown === store.now.cooldown) store.set({ frame: p.keys["frame"] });
    else if (cooldowns[cooldown] !== undefined)
      store.set({
        cooldown,
        frame: p.keys["frame"],
        pinned: null,
        pointed: null,
        view: null,
        line: null,
        region: null,
      });
  }

  private pointedOnRail(clientX: number): void {
    const c = current(this.context);
    const run = unfold(c.frameRows);
    const box = this.rail.getBoundingClientRect();
    const at = ((clientX - box.left - 10) / (box.width - 20)) * run.length;
    const off = (f: number): number => Math.abs((run.at.get(f) ?? 0) - at);
    const frames = c.frameRows.map((r) => must(r, "frame"));
    this.context.store.set({ frame: frames.reduce((a, b) => (off(b) < off(a) ? b : a)) });
  }

  private take(node: HTMLElement, go: (x: number, y: number) => void): void {
    let held = false;
    node.addEventListener("pointerdown", (e) => {
      if (e.button !== 0) return;
      held = true;
      node.setPointerCapture(e.pointerId);
      go(e.clientX, e.clientY);
    });
    node.addEventListener("pointermove", (e) => {
      if (held) go(e.clientX, e.clientY);
    });
    for (const type of ["pointerup", "pointercancel"] as const) node.addEventListener(type, () => (held = false));
  }
}
