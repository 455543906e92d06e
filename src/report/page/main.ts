import { countOf } from "../../model/text.js";
import { domainChart, widthChart } from "./charts.js";
import { current, kelvin, type Context } from "./context.js";
import { Cooldown, readIndex } from "./cooldown.js";
import { correctionsSection } from "./corrections.js";
import { button, h, on } from "./dom.js";
import { Frames } from "./frames.js";
import { inspector } from "./inspector.js";
import { KEYS, takeKeys } from "./keyboard.js";
import { layerControls, mapLegend, splitControl, zoomControls } from "./layers.js";
import { cautionsSection, doubtsSection, loopsSection, originSection } from "./lists.js";
import { FrameMap } from "./map.js";
import { frameReadout, placeReadout } from "./readout.js";
import { Spine } from "./spine.js";
import { thumbBar } from "./thumb_bar.js";
import { Store } from "./state.js";
import type { Shown } from "../../figures/paint.js";
import { must } from "../../figures/rows.js";

async function start(): Promise<void> {
  const index = readIndex();
  const cooldowns = await Promise.all(index.cooldowns.map((c) => Cooldown.load(c)));
  const store = new Store({
    cooldown: 0,
    frame: firstFrame(cooldowns[0]),
    base: "amplitude",
    over: "none",
    mix: 0.5,
    walls: true,
    compare: "off",
    split: 0.5,
    tool: "look",
    pinned: null,
    pointed: null,
    at: null,
    line: null,
    region: null,
    view: null,
    allLoops: false,
    corrections: [],
    reason: "",
  });
  const context: Context = { store, cooldowns, frames: cooldowns.map((c) => new Frames(c)) };
  await context.frames[0].load(store.now.frame);
  build(context, index.programVersion);
  document.documentElement.dataset["ready"] = String(Math.round(performance.now()));
  store.on(["cooldown"], ({ cooldown, frame, base }) => {
    if (!hasChannel(cooldowns[cooldown], base)) store.set({ base: "states" });
    void context.frames[cooldown]
      .loadAll(frame, () => undefined)
      .then(() => {
        document.documentElement.dataset["loaded"] = String(cooldown);
      });
  });
}

const hasChannel = (c: Cooldown, shown: Shown): boolean => shown === "states" || c.index.scales[shown] !== undefined;

/** Where there is most to see: the frame whose fraction is nearest one half. */
function firstFrame(c: Cooldown): number {
  const off = (k: number): number => {
    const v = c.frameRows[k]["metallic_fraction"];
    return typeof v === "number" ? Math.abs(v - 0.5) : 1;
  };
  return c.frameRows.reduce((best, r, k) => (off(k) < off(best) ? must(r, "frame") : best), 0);
}

function build(context: Context, version: string): void {
  const map = new FrameMap(context);
  const spine = new Spine(context);
  takeKeys(context, map, spine);
  document
    .getElementById("page")
    ?.append(
      header(context),
      h(
        "main",
        { class: "bench" },
        h("div", { class: "col spine-col" }, spine.node, frameReadout(context)),
        h(
          "section",
          { class: "card map-card", "aria-label": "map" },
          layerControls(context),
          h("div", { class: "map-frame" }, map.node, zoomControls(map)),
          splitControl(context),
          placeReadout(context),
          mapLegend(context),
          h(
            "details",
            { class: "numbers", id: "map-keys" },
            h("summary", {}, "Keys and gestures"),
            h("dl", { class: "facts" }, ...KEYS.flatMap(([k, v]) => [h("dt", {}, k), h("dd", {}, v)])),
            h(
              "p",
              { class: "notes" },
              "Mouse: click keeps what is pointed at, double click or Ctrl+wheel enlarges, drag moves. Touch: a way across goes along the loop, two fingers enlarge.",
            ),
          ),
        ),
        inspector(context),
      ),
      h(
        "div",
        { class: "below" },
        h(
          "div",
          { class: "col" },
          widthChart(context),
          loopsSection(context),
          correctionsSection(context),
          originSection(context),
        ),
        h("div", { class: "col" }, domainChart(context), doubtsSection(context), cautionsSection(version)),
      ),
      thumbBar(context),
    );
  openForPrint();
}

function header(context: Context): HTMLElement {
  const { store, cooldowns } = context;
  const title = h("h1", {});
  const about = h("p", { class: "about" });
  const select = on(
    h(
      "select",
      { id: "cooldown", "aria-label": "cooldown" },
      ...cooldowns.map((c, k) => h("option", { value: k }, c.info.cooldown)),
    ),
    "change",
    () => {
      const cooldown = Number(select.value);
      const c = cooldowns[cooldown];
      // The same temperature of the same branch, as far as there is one.
      const now = current(context).frameRow(store.now.frame);
      const off = (k: number): number =>
        Math.abs(must(c.frameRows[k], "temperature_K") - must(now, "temperature_K")) +
        (c.frameRows[k]["branch"] === now["branch"] ? 0 : 1000);
      const frame = c.frameRows.reduce((best, _, k) => (off(k) < off(best) ? k : best), 0);
      store.set({ cooldown, frame, pinned: null, pointed: null, line: null, region: null, view: null, at: null });
    },
  );
  store.on(["cooldown"], ({ cooldown }) => {
    const c = current(context);
    const t = c.frameRows.map((r) => must(r, "temperature_K"));
    title.replaceChildren(c.info.cooldown);
    select.value = String(cooldown);
    about.replaceChildren(
      `sample ${c.info.sample}${c.info.region === null ? "" : `, region ${c.info.region}`} · ${countOf(t.length, "frame")}, ${kelvin(Math.min(...t))} to ${kelvin(Math.max(...t))} · analysis ${c.info.analysis}, coldseam ${c.info.programVersion}`,
    );
  });
  return h(
    "header",
    { class: "top" },
    h(
      "div",
      { class: cooldowns.length > 1 ? "names several" : "names" },
      cooldowns.length > 1 ? h("div", { class: "pick" }, select) : null,
      title,
      about,
    ),
    button("print", () => window.print(), { class: "no-print" }),
  );
}

/** On paper everything is open. */
function openForPrint(): void {
  let opened: HTMLDetailsElement[] = [];
  window.addEventListener("beforeprint", () => {
    opened = [...document.querySelectorAll<HTMLDetailsElement>("details.group:not([open])")];
    for (const d of opened) d.open = true;
  });
  window.addEventListener("afterprint", () => {
    for (const d of opened) d.open = false;
  });
}

start().catch((e: unknown) => {
  const problem = e instanceof Error ? e.message : String(e);
  document
    .getElementById("page")
    ?.replaceChildren(
      h(
        "p",
        { class: "fault", role: "alert" },
        `This page could not be drawn: ${problem}. It needs a browser of 2023 or later.`,
      ),
    );
  throw e;
});
