import type { Figure } from "../../figures/figure.js";
import { axes, bottomRoom, leftRoom, type Panel } from "../../figures/panel.js";
import { extent, linear, niceTicks, numberText, tickLabels } from "../../figures/scale.js";
import { styleNamed } from "../../figures/style.js";
import { element, polyline, pt } from "../../figures/svg.js";
import { current, currentFrames, SHOWN, type Context } from "./context.js";
import { figureNode, figureTable, h, numbersOf, on } from "./dom.js";
import { pixelAt, valueAt, type Frame } from "./frames.js";
import { PX_PER_PT } from "./spine.js";
import { isPoint, type Point, type Store } from "./state.js";

/** Distance between two places and the stored image along the line between them. */
export function measurePanel(context: Context): HTMLElement {
  const { store } = context;
  const inputs = cornerInputs(store, "line", ["A", "B"]);
  const says = h("p", { class: "result", role: "status", "aria-live": "polite", id: "distance" });
  const cut = h("div", { class: "cut" });
  const node = h(
    "div",
    {},
    h("h2", {}, "Measure"),
    h(
      "p",
      { class: "hint" },
      "Drag from A to B on the map, or type both places (nm). On the map's keyboard: Enter sets A, then B.",
    ),
    inputs.node,
    says,
    cut,
  );
  store.on(["line", "frame", "base", "cooldown", "tool"], (s) => {
    if (s.tool !== "measure") return;
    inputs.set(s.line);
    if (s.line === null) {
      says.replaceChildren("");
      cut.replaceChildren();
      return;
    }
    if (isPoint(s.line)) {
      says.replaceChildren("A is set; Enter sets B.");
      cut.replaceChildren();
      return;
    }
    const [a, b] = s.line;
    const [dx, dy] = [b.xNm - a.xNm, b.yNm - a.yNm];
    const angle = (Math.atan2(-dy, dx) * 180) / Math.PI;
    says.replaceChildren(
      h("strong", {}, `${numberText(Math.hypot(dx, dy), 1)} nm`),
      `; Δx ${numberText(dx, 1)}, Δy ${numberText(dy, 1)} nm; ${numberText(angle, 1)}° anticlockwise from +x`,
    );
    const shown = s.base === "states" ? "amplitude" : s.base;
    void currentFrames(context)
      .load(s.frame)
      .then((f) => {
        if (store.now.line !== s.line || store.now.frame !== s.frame) return;
        const figure = cutFigure(
          context,
          f,
          shown,
          s.line as readonly [Point, Point],
          Math.max(190, node.clientWidth / PX_PER_PT),
        );
        if (figure === null) cut.replaceChildren(h("p", {}, `no ${shown} in this frame`));
        else
          cut.replaceChildren(
            figureNode(figure),
            numbersOf("The cut in numbers", () => figureTable(figure)),
          );
      });
  });
  return node;
}

/** Four number fields for two places of the map, bound to a key of the state. */
export function cornerInputs(
  store: Store,
  key: "line" | "region",
  names: readonly [string, string],
): { node: HTMLElement; set: (v: readonly [Point, Point] | null) => void } {
  const take = (): void => {
    const v = fields.map((f) => (f.value.trim() === "" ? Number.NaN : Number(f.value)));
    if (v.every(Number.isFinite))
      store.set({
        [key]: [
          { xNm: v[0], yNm: v[1] },
          { xNm: v[2], yNm: v[3] },
        ],
      });
  };
  const fields = names.flatMap((n) =>
    ["x", "y"].map((axis) =>
      on(h("input", { type: "number", step: "any", "aria-label": `${n}, ${axis} in nm` }), "change", take),
    ),
  );
  return {
    node: h(
      "div",
      { class: "corners" },
      ...names.flatMap((n, k) => [h("span", {}, n), fields[2 * k], fields[2 * k + 1], h("span", {}, "nm")]),
    ),
    set: (v) => {
      const texts = (q: Point): string[] => [q.xNm.toFixed(1), q.yNm.toFixed(1)];
      const values = v === null ? ["", "", "", ""] : [...texts(v[0]), ...(isPoint(v) ? ["", ""] : texts(v[1]))];
      fields.forEach((f, k) => {
        if (document.activeElement !== f) f.value = values[k];
      });
    },
  };
}

const MOST_SAMPLES = 1000;

/** The stored image along a line, a value a pixel that it crosses; a strip below it has the states. Null where the frame lacks the channel. */
function cutFigure(
  context: Context,
  frame: Frame,
  shown: "amplitude" | "phase" | "topography",
  [a, b]: readonly [Point, Point],
  widthPt: number,
): Figure | null {
  const channel = frame.channels[shown];
  if (channel === undefined) return null;
  const c = current(context);
  const s = styleNamed("paper");
  const d = c.drift(frame.frame) ?? { xNm: 0, yNm: 0 };
  const { pixelXNm, pixelYNm, amplitudeUnit } = c.info;
  const long = Math.hypot(b.xNm - a.xNm, b.yNm - a.yNm);
  const step = Math.min(pixelXNm * channel.head.stepX, pixelYNm * channel.head.stepY) / 2;
  const n = Math.min(MOST_SAMPLES, Math.max(2, Math.ceil(long / step) + 1));
  const samples = Array.from({ length: n }, (_, k) => {
    const t = k / (n - 1);
    const x = a.xNm + t * (b.xNm - a.xNm) - d.xNm;
    const y = a.yNm + t * (b.yNm - a.yNm) - d.yNm;
    const p = pixelAt(frame, x, y, pixelXNm, pixelYNm);
    return { at: t * long, value: valueAt(channel, x, y, pixelXNm, pixelYNm), state: p < 0 ? 255 : frame.states[p] };
  });
  const [low, high] = extent(
    samples.map((v) => v.value),
    0.08,
  );
  const unit = { amplitude: amplitudeUnit, phase: "rad", topography: "nm" }[shown];
  const title = `${SHOWN[shown]}${unit === "" ? "" : ` (${unit})`}`;
  const yTicks = niceTicks(low, high, 4);
  const left = leftRoom(tickLabels(yTicks), title, s) + 2;
  const width = widthPt - left - 4;
  const height = width * 0.5;
  const x = linear(0, Math.max(long, 1e-9), left, left + width);
  const panel: Panel = { left, top: 4, width, height, x, y: linear(low, high, 4 + height, 4) };
  const strip = samples.slice(1).map((v, k) =>
    v.state > 1
      ? ""
      : element("rect", {
          x: pt(x(samples[k].at)),
          y: pt(4 + height - 5),
          width: pt(x(v.at) - x(samples[k].at) + 0.2),
          height: "5",
          fill: v.state === 1 ? s.metallic : s.insulating,
        }),
  );
  return {
    widthPt,
    heightPt: 4 + height + bottomRoom("x", s) + 3,
    style: s,
    title: `${SHOWN[shown]} along the line from A to B`,
    notes: [
      `Of the stored image, whose pixels are ${pixelXNm * channel.head.stepX} × ${pixelYNm * channel.head.stepY} nm. The strip at the bottom: the states.`,
    ],
    body: [
      ...strip,
      axes(panel, { title: "Distance from A (nm)" }, { title, ticks: yTicks }, s),
      polyline(
        samples.map((v) => x(v.at)),
        samples.map((v) => (v.value === null ? Number.NaN : panel.y(v.value))),
        { stroke: s.series[0], "stroke-width": 1 },
      ),
    ].join(""),
    table: {
      columns: ["distance_nm", shown, "state"],
      rows: samples.map((v) => [v.at, v.value, ["insulating", "metallic"][v.state] ?? ""]),
    },
  };
}
