import { must, num, word } from "../../figures/rows.js";
import { numberText } from "../../figures/scale.js";
import { countOf } from "../../model/text.js";
import { current, currentFrames, picked, type Context } from "./context.js";
import { markPanel } from "./corrections.js";
import { button, h } from "./dom.js";
import { showDomain } from "./domain_panel.js";
import { measurePanel } from "./measure.js";
import { showProfile } from "./profile_panel.js";

/** Beside the map: what is pointed at, or what the tool in hand gives; else what there is to look at in this frame. */
export function inspector(context: Context): HTMLElement {
  const { store } = context;
  const body = h("div", { class: "inspector-body" });
  const node = h(
    "section",
    { class: "card inspector", "aria-label": "closer look", id: "inspector", tabindex: -1 },
    body,
  );
  const tools = { measure: measurePanel(context), mark: markPanel(context) };
  let turn = 0;
  const show = (): void => {
    const mine = ++turn;
    const wanted = (): boolean => mine === turn;
    const { tool } = store.now;
    if (tool === "measure" || tool === "mark") return; // their panels fill themselves
    const pick = picked(context);
    node.dataset["kind"] = pick?.kind ?? "list";
    if (pick === null) showList(context, body, wanted);
    else if (pick.kind === "profile") void showProfile(context, pick, body, wanted);
    else void showDomain(context, pick.domain, body, wanted);
  };
  store.on(["cooldown", "frame", "pinned", "pointed", "tool"], show);
  store.on(["tool"], ({ tool }) => {
    if (tool === "look") return;
    node.dataset["kind"] = tool;
    body.replaceChildren(tools[tool]);
  });
  return node;
}

const MOST_LISTED = 14;

/** Walls and domains of the frame, each a way in that needs no pointer. */
function showList(context: Context, body: HTMLElement, wanted: () => boolean): void {
  const { frame } = context.store.now;
  const c = current(context);
  void currentFrames(context)
    .load(frame)
    .then(({ walls }) => {
      if (!wanted()) return;
      const profiles = c.profilesOf.get(frame) ?? [];
      const wallItems = [...walls]
        .sort((a, b) => b.lengthNm - a.lengthNm)
        .slice(0, MOST_LISTED)
        .map((w) => {
          const own = profiles.filter((r) => must(r, "wall") === w.wall);
          const first = own.find((r) => word(r, "flag") === "") ?? own[0];
          const text = `wall ${w.wall}: ${numberText(w.lengthNm, 0)} nm, ${countOf(own.length, "profile")}`;
          return h(
            "li",
            {},
            first === undefined
              ? text
              : button(text, () =>
                  context.store.set({
                    walls: true,
                    pinned: { kind: "profile", frame, wall: w.wall, profile: must(first, "profile") },
                  }),
                ),
          );
        });
      const domainItems = [...(c.domainsIn.get(frame) ?? [])]
        .sort((a, b) => must(b, "area_nm2") - must(a, "area_nm2"))
        .slice(0, MOST_LISTED)
        .map((r) => {
          const domain = must(r, "domain");
          const kind = word(c.domain(domain) ?? {}, "kind");
          const area = numberText(must(r, "area_nm2") / 1e6, 3);
          return h(
            "li",
            {},
            button(`domain ${domain}: ${kind}, ${area} µm²${num(r, "touches_border") === 1 ? " or more" : ""}`, () =>
              context.store.set({ pinned: { kind: "domain", domain } }),
            ),
          );
        });
      body.replaceChildren(
        h("h2", {}, "In this frame"),
        h("p", { class: "hint" }, "Point at a wall for its profile, at a domain for its history; a click keeps it."),
        h("h3", {}, countOf(walls.length, "wall")),
        h("ul", { class: "ways" }, ...wallItems),
        h("h3", {}, countOf((c.domainsIn.get(frame) ?? []).length, "domain")),
        h("ul", { class: "ways" }, ...domainItems),
      );
    });
}
