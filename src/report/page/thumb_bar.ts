import { must, num } from "../../figures/rows.js";
import { numberText } from "../../figures/scale.js";
import { current, frameText, type Context } from "./context.js";
import { button, h, on } from "./dom.js";
import { stepTo } from "./map_input.js";
import type { Picked } from "./state.js";

/** On a narrow screen, at its lower edge: the way along the loop, and to what was picked, wherever the page is scrolled to. */
export function thumbBar(context: Context): HTMLElement {
  const { store } = context;
  const slide = on(h("input", { type: "range", min: 0, step: 1, "aria-label": "frame" }), "input", () =>
    stepTo(context, Number(slide.value)),
  );
  const text = h("span", { class: "thumb-text" });
  const closer = button("", () => document.getElementById("inspector")?.scrollIntoView({ block: "start" }), {
    class: "closer",
  });
  store.on(["cooldown", "frame", "pinned"], (s) => {
    const c = current(context);
    slide.max = String(c.frameRows.length - 1);
    slide.value = String(s.frame);
    slide.setAttribute("aria-valuetext", frameText(c, s.frame));
    text.replaceChildren(frameText(c, s.frame));
    closer.hidden = s.pinned === null;
    if (s.pinned !== null) closer.replaceChildren(`${pickText(context, s.pinned)} ↓`);
  });
  return h(
    "nav",
    { class: "thumb-bar", "aria-label": "along the loop" },
    h("div", { class: "thumb-row" }, text, closer),
    h(
      "div",
      { class: "thumb-row" },
      button("◀", () => stepTo(context, store.now.frame - 1), { "aria-label": "frame before" }),
      slide,
      button("▶", () => stepTo(context, store.now.frame + 1), { "aria-label": "next frame" }),
    ),
  );
}

function pickText(context: Context, pick: Picked): string {
  if (pick.kind === "domain") return `domain ${pick.domain}`;
  const r = current(context).profile(pick.frame, pick.wall, pick.profile);
  const width = r === null ? null : num(r, "width_nm");
  return width === null || r === null ? `wall ${pick.wall}` : `wall ${must(r, "wall")}, ${numberText(width, 1)} nm`;
}
