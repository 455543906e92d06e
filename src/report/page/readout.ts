import { apparentWidths } from "../../figures/apparent.js";
import { num, word, type Row } from "../../figures/rows.js";
import { numberText } from "../../figures/scale.js";
import {
  current,
  currentFrames,
  fractionText,
  frameText,
  SHOWN,
  withInterval,
  withSd,
  type Context,
} from "./context.js";
import type { Cooldown } from "./cooldown.js";
import { h } from "./dom.js";
import { pixelAt, valueAt } from "./frames.js";

/** What is shown, in words and numbers: read out at every change. */
export function frameReadout(context: Context): HTMLElement {
  const line = h("p", { class: "now", role: "status", "aria-live": "polite", id: "now" });
  const list = h("dl", { class: "facts" });
  context.store.on(["cooldown", "frame"], ({ frame }) => {
    const c = current(context);
    const r = c.frameRow(frame);
    line.replaceChildren(h("strong", {}, frameText(c, frame)), `: metallic fraction ${fractionText(c, frame)}`);
    const rows: [string, string][] = [];
    const spread = num(r, "temperature_sd_K");
    if (spread !== null) rows.push(["temperature", `spread ${numberText(spread, 3)} K over the scan${rampText(r)}`]);
    const drift = c.drift(frame);
    rows.push([
      "place",
      drift === null
        ? "not placed"
        : `x ${numberText(drift.xNm, 2)}, y ${withSd(drift.yNm, num(r, "drift_sd_nm"), 2, "nm")}`,
    ]);
    rows.push(...(c.info.tipResolutionNm === null ? apparentFacts(c, frame) : widthFacts(r)));
    const fringes = num(r, "fringe_share");
    rows.push([
      "fringes on",
      fringes === null ? "none tested" : `${numberText(100 * fringes, 0)} % of the tested wall`,
    ]);
    const length = num(r, "wall_length_nm");
    rows.push(["walls", length === null ? "none" : `${numberText(length / 1000, 2)} µm`]);
    rows.push([
      "domains",
      `${num(r, "metallic_domains") ?? "–"} metallic, ${num(r, "insulating_domains") ?? "–"} insulating`,
    ]);
    if (word(r, "flag") !== "") rows.push(["flag", word(r, "flag")]);
    for (const e of c.info.exclusions)
      if (e.frame === frame) rows.push([e.regionNm === null ? "left out" : "region left out", e.reason]);
    for (const n of c.info.notices)
      if (n.frame === frame && !n.code.startsWith("excluded-")) rows.push(["note", n.message]);
    list.replaceChildren(...rows.flatMap(([k, v]) => [h("dt", {}, k), h("dd", {}, v)]));
  });
  return h("section", { class: "card", "aria-label": "this frame" }, line, list);
}

function widthFacts(r: Row): [string, string][] {
  const median = num(r, "wall_width_median_nm");
  const unresolved = num(r, "unresolved_share");
  return [
    [
      "median wall width",
      median === null
        ? (unresolved ?? 0) > 0.5
          ? "none: over half are limits"
          : "none"
        : `${withInterval(median, num(r, "wall_width_median_low_nm"), num(r, "wall_width_median_high_nm"), 1)} nm`,
    ],
    [
      "sound profiles",
      `${num(r, "profiles") ?? 0}${unresolved === null ? "" : `, ${numberText(100 * unresolved, 0)} % limits`}`,
    ],
  ];
}

/** Without a tip's resolution a width is as seen, the blur in it. */
function apparentFacts(c: Cooldown, frame: number): [string, string][] {
  const seen = apparentWidths(c.profilesOf.get(frame) ?? []);
  return [
    [
      "median apparent width",
      seen === null
        ? "none"
        : `${numberText(seen.medianNm, 1)} nm (middle half of the profiles ${numberText(seen.lowQuartileNm, 1)} to ${numberText(seen.highQuartileNm, 1)}), the tip's blur in it`,
    ],
    ["sound profiles", `${num(c.frameRow(frame), "profiles") ?? 0}; no tip resolution was given`],
  ];
}

function rampText(r: Row): string {
  const [ramp, lag] = [num(r, "ramp_K_per_s"), num(r, "lag_shift_K")];
  return [
    ramp === null ? "" : `, ramp ${numberText(1000 * ramp, 2)} mK/s`,
    lag === null || lag === 0 ? "" : `, ${numberText(lag, 3)} K added for the lag`,
  ].join("");
}

/** Where the pointer or the cross is, and what the stored images hold there. */
export function placeReadout(context: Context): HTMLElement {
  const box = h("p", { class: "place", id: "place" });
  context.store.on(["at", "frame", "cooldown", "base", "over"], (s) => {
    if (s.at === null) {
      box.replaceChildren("Point at the map: place, value and state are read here.");
      return;
    }
    const c = current(context);
    const frame = currentFrames(context).get(s.frame);
    const d = c.drift(s.frame) ?? { xNm: 0, yNm: 0 };
    const { pixelXNm, pixelYNm } = c.info;
    const parts = [`x ${numberText(s.at.xNm, 0)} nm, y ${numberText(s.at.yNm, 0)} nm`];
    if (frame !== null) {
      const [x, y] = [s.at.xNm - d.xNm, s.at.yNm - d.yNm];
      for (const shown of new Set([s.base, s.over])) {
        if (shown === "none" || shown === "states") continue;
        const channel = frame.channels[shown];
        const v = channel === undefined ? null : valueAt(channel, x, y, pixelXNm, pixelYNm);
        parts.push(
          `${SHOWN[shown].toLowerCase()} ${v === null ? "not measured" : valueText(v, shown, c.info.amplitudeUnit)}`,
        );
      }
      const k = pixelAt(frame, x, y, pixelXNm, pixelYNm);
      const state = k < 0 ? "outside the frame" : (["insulating", "metallic"][frame.states[k]] ?? "no state");
      const domain = k < 0 ? 0 : (frame.domains?.[k] ?? 0);
      parts.push(domain === 0 ? state : `${state}, domain ${domain - 1}`);
    }
    box.replaceChildren(parts.join(" · "));
  });
  return box;
}

export function valueText(v: number, shown: string, amplitudeUnit: string): string {
  if (shown === "phase") return `${numberText(v, 3)} rad`;
  if (shown === "topography") return `${numberText(v, 2)} nm`;
  return `${Number(v.toPrecision(4))}${amplitudeUnit === "" ? "" : ` ${amplitudeUnit}`}`;
}
