import type { Figure } from "../../figures/figure.js";
import { marker } from "../../figures/marks.js";
import { axes, bottomRoom, leftRoom, type Panel } from "../../figures/panel.js";
import { must, num, word, type Row } from "../../figures/rows.js";
import { extent, linear, niceTicks, numberText, tickLabels } from "../../figures/scale.js";
import { styleNamed } from "../../figures/style.js";
import { line, polyline } from "../../figures/svg.js";
import { seriesMarks, unfold, unfoldedTicks } from "../../figures/unfold.js";
import { countOf } from "../../model/text.js";
import { current, currentFrames, frameText, kelvin, type Context } from "./context.js";
import type { Cooldown } from "./cooldown.js";
import { button, figureNode, h, numbersOf, tableOf } from "./dom.js";
import { domainBox } from "./outline.js";
import { PX_PER_PT } from "./spine.js";

/** The life of a domain: where it began and ended, its area along the run, each of its frames a way there. */
export async function showDomain(
  context: Context,
  domain: number,
  box: HTMLElement,
  wanted: () => boolean,
): Promise<void> {
  const c = current(context);
  const row = c.domain(domain);
  if (row === null) return;
  const { store } = context;
  const { frame } = store.now;
  const unpacked = await currentFrames(context).load(frame);
  if (!wanted()) return;
  const own = c.appearancesOf.get(domain) ?? [];
  const here = own.find((r) => must(r, "frame") === frame);
  const kind = word(row, "kind");
  const first = must(row, "first_frame");
  const last = must(row, "last_frame");
  const go = (to: number): void => store.set({ frame: to, pinned: { kind: "domain", domain } });
  const figure = historyFigure(c, row, own, frame, Math.max(190, box.clientWidth / PX_PER_PT));
  const facts: [string, Node | string][] = [
    [
      "begins",
      h(
        "span",
        {},
        `${word(row, "origin")}, `,
        button(frameText(c, first), () => go(first)),
      ),
    ],
    [
      "ends",
      h(
        "span",
        {},
        `${word(row, "fate")}, `,
        button(frameText(c, last), () => go(last)),
      ),
    ],
    ["largest area", `${numberText(must(row, "largest_area_nm2") / 1e6, 4)} µm²`],
    ["here", here === undefined ? "not in this frame" : areaText(here)],
  ];
  const region = here === undefined ? null : domainBox(c, unpacked, domain);
  const wrong = button("its state is wrong here …", () => {
    const d = c.drift(frame) ?? { xNm: 0, yNm: 0 };
    if (region === null) return;
    store.set({
      tool: "mark",
      reason: `domain ${domain} is not ${kind}: `,
      region: [
        { xNm: region.x0Nm + d.xNm, yNm: region.y0Nm + d.yNm },
        { xNm: region.x1Nm + d.xNm, yNm: region.y1Nm + d.yNm },
      ],
    });
  });
  wrong.disabled = region === null;
  box.replaceChildren(
    h("h2", {}, h("span", { class: `swatch ${kind}` }), `Domain ${domain}, ${kind}`),
    h("p", { class: "where" }, `seen in ${countOf(own.length, "frame")}; outlined in each of them`),
    h("dl", { class: "facts" }, ...facts.flatMap(([k, v]) => [h("dt", {}, k), h("dd", {}, v)])),
    figureNode(figure),
    numbersOf("Its frames", () =>
      tableOf(
        ["frame", "temperature", "area", ""],
        own.map((r) => [
          button(String(must(r, "frame")), () => go(must(r, "frame"))),
          kelvin(must(c.frameRow(must(r, "frame")), "temperature_K")),
          `${numberText(must(r, "area_nm2") / 1e6, 4)} µm²`,
          num(r, "touches_border") === 1 ? "at the border" : "",
        ]),
      ),
    ),
    h("div", { class: "row" }, wrong),
  );
}

const areaText = (r: Row): string => {
  const area = `${numberText(must(r, "area_nm2") / 1e6, 4)} µm²`;
  const round = num(r, "perimeter_nm");
  return num(r, "touches_border") === 1
    ? `${area} or more: at the border`
    : `${area}${round === null ? "" : `, perimeter ${numberText(round / 1000, 2)} µm`}`;
};

/** Area of one domain along the run; open signs where it touches the border. */
function historyFigure(c: Cooldown, row: Row, own: readonly Row[], frame: number, widthPt: number): Figure {
  const s = styleNamed("paper");
  const run = unfold(c.frameRows);
  const areas = own.map((r) => must(r, "area_nm2") / 1e6);
  const high = Math.max(extent(areas)[1] * 1.12, 1e-9);
  const yTicks = niceTicks(0, high, 3);
  const left = leftRoom(tickLabels(yTicks), "Area (µm²)", s) + 2;
  const width = widthPt - left - 4;
  const top = s.textPt + 8;
  const height = width * 0.42;
  const x = linear(-0.03 * run.length, 1.03 * run.length, left, left + width);
  const panel: Panel = { left, top, width, height, x, y: linear(0, high, top + height, top) };
  const kind = word(row, "kind");
  const colour = kind === "metallic" ? s.metallic : s.insulating;
  const at = (r: Row): number => x(run.at.get(must(r, "frame")) ?? 0);
  const now = x(run.at.get(frame) ?? 0);
  return {
    widthPt,
    heightPt: top + height + bottomRoom("T", s) + 3,
    style: s,
    title: `Area of domain ${must(row, "domain")}`,
    notes: ["Open signs: it touches the edge of the measured area there, and the area is a lower bound."],
    body: [
      line(now, top, now, top + height, { stroke: "#c8102e", "stroke-width": 1 }),
      seriesMarks(run, x, top, height, s),
      axes(
        panel,
        { title: "Temperature (K), in the order of the run", ...unfoldedTicks(run, width / 34) },
        { title: "Area (µm²)", ticks: yTicks },
        s,
      ),
      polyline(
        own.map(at),
        areas.map((a) => panel.y(a)),
        { stroke: colour, "stroke-width": 1 },
      ),
      ...own.map((r, k) =>
        marker(at(r), panel.y(areas[k]), {
          shape: "circle",
          size: 3.4,
          fill: num(r, "touches_border") === 1 ? s.background : colour,
          stroke: colour,
          strokeWidth: 0.8,
        }),
      ),
    ].join(""),
    table: { columns: [], rows: [] },
  };
}
