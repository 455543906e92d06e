import { must, num, word, type Row } from "../../figures/rows.js";
import { numberText } from "../../figures/scale.js";
import { countOf } from "../../model/text.js";
import { CAUTIONS, LIMITS } from "./cautions.js";
import { current, frameText, withInterval, type Context } from "./context.js";
import type { Cooldown } from "./cooldown.js";
import { button, h, tableOf } from "./dom.js";
import { standing } from "./frames.js";
import type { State } from "./state.js";

interface Entry {
  readonly frame: number | null;
  readonly reason: string;
  readonly change?: Partial<State>;
  /** How many of what is listed the line stands for; one where not given. */
  readonly count?: number;
}

/** Everything left out, failed or uncertain, with its reason; each line leads to its frame. */
export function doubtsSection(context: Context): HTMLElement {
  const body = h("div");
  context.store.on(["cooldown"], () => {
    const c = current(context);
    const groups: [string, Entry[]][] = [
      [
        "Left out by the user",
        c.info.exclusions.map((e) => ({
          frame: e.frame,
          reason: `${e.regionNm === null ? "the whole frame" : "a region"}: ${e.reason}`,
        })),
      ],
      ["Notes of the analysis", c.info.notices.map((n) => ({ frame: n.frame, reason: `${n.code}: ${n.message}` }))],
      ["Frames without a number", c.frameRows.filter((r) => word(r, "flag") !== "").map(flagged)],
      [
        "Profiles left out of the statistics",
        profileGroups(c, (r) => (standing(r) === "flagged" ? word(r, "flag") : null)),
      ],
      [
        "Widths that are upper limits only",
        profileGroups(c, (r) =>
          standing(r) === "limit"
            ? c.info.tipResolutionNm === null
              ? "no tip resolution given"
              : "not told from zero"
            : null,
        ),
      ],
      [
        "Frames whose domains cannot be told apart",
        c.index.frames
          .filter((f) => f.domains === null)
          .map((f) => ({ frame: f.frame, reason: "the regions of the map are not those of the rows" })),
      ],
    ];
    body.replaceChildren(
      ...groups.map(([name, entries]) =>
        entries.length === 0
          ? h("p", { class: "none" }, `${name}: none`)
          : h(
              "details",
              { class: "group" },
              h("summary", {}, `${name}: ${entries.reduce((n, e) => n + (e.count ?? 1), 0)}`),
              h("ul", { class: "entries" }, ...entries.map((e) => line(context, c, e))),
            ),
      ),
    );
  });
  return h(
    "section",
    { class: "card", "aria-label": "left out, failed, uncertain" },
    h("h2", {}, "Left out, failed, uncertain"),
    body,
  );
}

const flagged = (r: Row): Entry => ({ frame: must(r, "frame"), reason: word(r, "flag") });

function line(context: Context, c: Cooldown, e: Entry): HTMLElement {
  const { frame } = e;
  return h(
    "li",
    {},
    frame === null
      ? "whole cooldown"
      : button(frameText(c, frame), () => {
          context.store.set({ frame, tool: "look", ...e.change });
          document.querySelector(".map-box")?.scrollIntoView({ block: "nearest" });
        }),
    ` ${e.reason}`,
  );
}

/** Profiles of each frame by why they are listed; a line leads to the first of them. */
function profileGroups(c: Cooldown, why: (r: Row) => string | null): Entry[] {
  const out: Entry[] = [];
  for (const [frame, rows] of c.profilesOf) {
    const groups = new Map<string, Row[]>();
    for (const r of rows) {
      const reason = why(r);
      if (reason !== null) groups.set(reason, [...(groups.get(reason) ?? []), r]);
    }
    for (const [reason, list] of groups)
      out.push({
        frame,
        reason: `${reason}: ${countOf(list.length, "profile")}`,
        count: list.length,
        change: {
          walls: true,
          pinned: { kind: "profile", frame, wall: must(list[0], "wall"), profile: must(list[0], "profile") },
        },
      });
  }
  return out;
}

/** The loop of each cycle in numbers. */
export function loopsSection(context: Context): HTMLElement {
  const body = h("div", { class: "scroll loops" });
  const cell = (r: Row, name: string, unit: string, digits: number): string => {
    const v = num(r, `${name}_K`);
    return v === null
      ? "none"
      : `${withInterval(v, num(r, `${name}_low_K`), num(r, `${name}_high_K`), digits)} ${unit}`;
  };
  context.store.on(["cooldown"], () => {
    const c = current(context);
    body.replaceChildren(
      tableOf(
        ["cycle", "half, cooling", "half, warming", "width", "area", "fraction", ""],
        c.tables.loops.map((r) => {
          const area = num(r, "area_K");
          const [low, high] = [num(r, "lowest_fraction"), num(r, "highest_fraction")];
          return [
            String(must(r, "cycle")),
            cell(r, "cooling_half", "K", 2),
            cell(r, "warming_half", "K", 2),
            cell(r, "width", "K", 2),
            area === null ? "none" : `${numberText(area, 2)} K`,
            low === null || high === null ? "none" : `${numberText(low, 3)} to ${numberText(high, 3)}`,
            num(r, "complete") === 1 ? "complete" : "incomplete",
          ];
        }),
      ),
    );
  });
  return h(
    "section",
    { class: "card", "aria-label": "loops" },
    h("h2", {}, "Loops"),
    body,
    h("p", { class: "notes" }, "In brackets: 95 % intervals."),
  );
}

/** Where the numbers come from: settings, sources, versions. */
export function originSection(context: Context): HTMLElement {
  const body = h("div");
  context.store.on(["cooldown"], () => {
    const { info } = current(context);
    const tip =
      info.tipResolutionNm === null
        ? "no resolution given"
        : `${info.tipResolutionNm}${info.tipResolutionSdNm === null ? "" : ` ± ${info.tipResolutionSdNm}`} nm`;
    const facts: [string, string][] = [
      [
        "analysis",
        `${info.analysis}${info.analyses > 1 ? ` of ${info.analyses} of this cooldown` : ""}, ${info.madeAt.slice(0, 16).replace("T", " ")} UTC`,
      ],
      ["program", `coldseam ${info.programVersion}`],
      ["pixel", `${info.pixelXNm} × ${info.pixelYNm} nm`],
      ["tip", tip],
      ...(info.photonEnergyMeV === null
        ? []
        : [["light", `${numberText(info.photonEnergyMeV, 2)} meV`] as [string, string]]),
      ...(info.filmThicknessNm === null ? [] : [["film", `${info.filmThicknessNm} nm`] as [string, string]]),
      [
        "settings changed",
        info.changedSettings.length === 0 ? "none: all at their defaults" : info.changedSettings.join(", "),
      ],
    ];
    body.replaceChildren(
      h("dl", { class: "facts wide" }, ...facts.flatMap(([k, v]) => [h("dt", {}, k), h("dd", {}, v)])),
      h(
        "details",
        { class: "group" },
        h("summary", {}, `Sources: ${countOf(info.sources.length, "file")}`),
        h(
          "div",
          { class: "scroll" },
          tableOf(
            ["file", "bytes", "SHA-256"],
            info.sources.map((s) => [s.path, String(s.bytes), h("code", {}, s.sha256)]),
          ),
        ),
      ),
    );
  });
  return h("section", { class: "card", "aria-label": "origin" }, h("h2", {}, "Where the numbers come from"), body);
}

export function cautionsSection(version: string): HTMLElement {
  const list = (texts: readonly string[]): HTMLElement =>
    h("ul", { class: "plain" }, ...texts.map((t) => h("li", {}, t)));
  return h(
    "section",
    { class: "card", "aria-label": "cautions" },
    h("h2", {}, "What these numbers cannot tell"),
    list(LIMITS),
    h("h2", {}, "Cautions"),
    list(CAUTIONS),
    h(
      "p",
      { class: "notes" },
      `Page written by coldseam ${version}. It holds all it shows; nothing is fetched and nothing is kept.`,
    ),
  );
}
