import { countOf } from "../../model/text.js";
import type { ExclusionData } from "../data.js";
import { excludeLines, LONGEST_REASON, reasonLine, regionWithin } from "../exclude_lines.js";
import { current, frameText, type Context } from "./context.js";
import { button, h, on } from "./dom.js";
import { cornerInputs } from "./measure.js";
import { isPoint } from "./state.js";

/** New corrections of the cooldown that is shown. */
const added = (context: Context): readonly ExclusionData[] =>
  context.store.now.corrections.filter((e) => e.cooldown === context.store.now.cooldown);

/** Marks the frame, or a region of it, as bad, with a reason. */
export function markPanel(context: Context): HTMLElement {
  const { store } = context;
  const inputs = cornerInputs(store, "region", ["corner", "corner"]);
  const reason = on(
    h("textarea", {
      rows: 3,
      maxlength: LONGEST_REASON,
      id: "reason",
      placeholder: "why, for whoever reads the result",
    }),
    "input",
    () => {
      store.set({ reason: reason.value });
    },
  );
  const says = h("p", { class: "result", role: "status", "aria-live": "polite" });
  const what = h("p", { class: "where" });
  const region = (): ExclusionData["regionNm"] => {
    const { region: r, frame } = store.now;
    if (r === null || isPoint(r)) return null;
    const c = current(context);
    const d = c.drift(frame) ?? { xNm: 0, yNm: 0 };
    const { rows, cols } = c.head(frame);
    const { pixelXNm, pixelYNm } = c.info;
    return regionWithin([r[0].xNm - d.xNm, r[0].yNm - d.yNm, r[1].xNm - d.xNm, r[1].yNm - d.yNm], {
      xNm: (cols - 1) * pixelXNm,
      yNm: (rows - 1) * pixelYNm,
    });
  };
  const add = (regionNm: ExclusionData["regionNm"]): void => {
    const line = reasonLine(store.now.reason);
    if (line === "") {
      says.replaceChildren("Say why first: the reason is stored with the result.");
      reason.focus();
      return;
    }
    const { cooldown, frame, corrections } = store.now;
    store.set({ corrections: [...corrections, { cooldown, frame, regionNm, reason: line }], region: null, reason: "" });
    says.replaceChildren("Added. The lines to copy stand under Corrections, below.");
  };
  const addRegion = button("leave out this region", () => add(region()));
  const addFrame = button("leave out the whole frame", () => add(null));
  store.on(["region", "frame", "cooldown", "reason", "tool"], (s) => {
    if (s.tool !== "mark") return;
    inputs.set(s.region);
    if (reason.value !== s.reason) reason.value = s.reason;
    const r = region();
    addRegion.disabled = r === null;
    what.replaceChildren(
      `In ${frameText(current(context), s.frame)}${
        r === null
          ? s.region === null
            ? ": drag a rectangle on the map for a region."
            : isPoint(s.region)
              ? ": one corner is set; Enter sets the other."
              : ": the region lies outside this frame."
          : `: region_nm [${r.join(", ")}] of the frame.`
      }`,
    );
  });
  return h(
    "div",
    {},
    h("h2", {}, "Mark as bad"),
    what,
    h(
      "p",
      { class: "hint" },
      "On the map's keyboard: Shift and the arrow keys move the cross, a first Enter sets one corner, a second the other. Or type both corners (nm).",
    ),
    inputs.node,
    h("label", { for: "reason", class: "block" }, "Reason"),
    reason,
    h("div", { class: "row" }, addRegion, addFrame),
    says,
  );
}

/** The lines for cooldown.yaml: what the user left out already, and what was marked on this page. */
export function correctionsSection(context: Context): HTMLElement {
  const { store } = context;
  const list = h("ul", { class: "entries" });
  const lines = h("pre", { id: "exclude-lines", tabindex: 0, "aria-label": "lines for cooldown.yaml" });
  const says = h("span", { role: "status", "aria-live": "polite" });
  const copy = button(
    "copy the lines",
    () => void copyText(lines.textContent ?? "", lines).then((t) => says.replaceChildren(t)),
  );
  const hint = h("p", { class: "hint" });
  store.on(["corrections", "cooldown"], () => {
    const c = current(context);
    const fresh = added(context);
    const stored = c.info.exclusions;
    const entry = (e: ExclusionData, drop: (() => void) | null): HTMLElement =>
      h(
        "li",
        {},
        button(frameText(c, e.frame), () => store.set({ frame: e.frame })),
        ` ${e.regionNm === null ? "whole frame" : `region ${e.regionNm.map((v) => Number(v.toFixed(1))).join(", ")} nm`}: ${e.reason} `,
        drop === null ? h("em", {}, "stored") : button("take back", drop),
      );
    list.replaceChildren(
      ...stored.map((e) => entry(e, null)),
      ...fresh.map((e) => entry(e, () => store.set({ corrections: store.now.corrections.filter((x) => x !== e) }))),
    );
    lines.textContent = excludeLines(stored, fresh);
    lines.hidden = copy.hidden = lines.textContent === "";
    says.replaceChildren("");
    hint.replaceChildren(
      fresh.length === 0
        ? stored.length === 0
          ? "Nothing is excluded by hand. With “mark bad” a frame or a region can be, with a reason; a domain’s state as wrong from the domain’s panel."
          : `${countOf(stored.length, "entry", "entries")} of cooldown.yaml, honoured by this analysis.`
        : `${countOf(fresh.length, "new entry", "new entries")}, kept only in this open page: put these lines into cooldown.yaml in the place of its exclude: entry, then ingest again.`,
    );
  });
  return h(
    "section",
    { class: "card", id: "corrections", "aria-label": "corrections" },
    h("h2", {}, "Corrections"),
    hint,
    list,
    lines,
    h("div", { class: "row" }, copy, says),
  );
}

/** To the clipboard where the browser allows it to a file; else selected, for Ctrl+C. */
async function copyText(text: string, shown: HTMLElement): Promise<string> {
  try {
    await navigator.clipboard.writeText(text);
    return "copied";
  } catch {
    const range = document.createRange();
    range.selectNodeContents(shown);
    const selection = window.getSelection();
    selection?.removeAllRanges();
    selection?.addRange(range);
    return "selected: copy with Ctrl+C";
  }
}
