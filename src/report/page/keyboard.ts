import { must } from "../../figures/rows.js";
import { current, picked, type Context } from "./context.js";
import type { FrameMap } from "./map.js";
import { pickAt } from "./pick.js";
import type { Spine } from "./spine.js";
import { isPoint, type Point } from "./state.js";
import { zoomed } from "./view.js";

export const KEYS: readonly (readonly [string, string])[] = [
  ["← →", "frame before, next frame (on the map and on the loop)"],
  ["↑ ↓", "over to the other branch"],
  ["Home End, Page Up Page Down", "first and last frame, five frames on"],
  ["W, Shift+W", "next profile along the walls, and back (map)"],
  ["D, Shift+D", "next domain, and back (map)"],
  ["Shift+arrows, Enter", "move the reading cross, pick what is there; with a tool: set its two points (map)"],
  ["+ − 0", "larger, smaller, whole field (map)"],
  ["Esc", "let go of what was picked"],
];

/** Keys on the map: none of them acts elsewhere, so that none is in the way of a screen reader or a text field. */
export function takeKeys(context: Context, map: FrameMap, spine: Spine): void {
  const { store } = context;
  map.canvas.addEventListener("keydown", (e) => {
    if (e.ctrlKey || e.metaKey || e.altKey) return;
    const p = map.projection;
    const about = store.now.at ?? { xNm: p.view.xNm, yNm: p.view.yNm };
    const done = (): void => e.preventDefault();
    if (e.shiftKey && e.key.startsWith("Arrow")) {
      store.set({ at: moved(about, e.key, 8 * p.view.nmPerPx) });
      return done();
    }
    if (spine.key(e)) return;
    switch (e.key) {
      case "w":
      case "W":
        nextProfile(context, e.shiftKey ? -1 : 1);
        return done();
      case "d":
      case "D":
        nextDomain(context, e.shiftKey ? -1 : 1);
        return done();
      case "+":
      case "=":
        store.set({ view: zoomed(p, map.fit, 2, about) });
        return done();
      case "-":
        store.set({ view: zoomed(p, map.fit, 0.5, about) });
        return done();
      case "0":
        store.set({ view: null });
        return done();
      case "Enter":
        place(map, about);
        return done();
      case "Escape":
        store.set({ pinned: null, pointed: null, line: null, region: null, tool: "look" });
        return done();
    }
  });
}

function moved(at: Point, key: string, byNm: number): Point {
  const dx = key === "ArrowLeft" ? -byNm : key === "ArrowRight" ? byNm : 0;
  const dy = key === "ArrowUp" ? -byNm : key === "ArrowDown" ? byNm : 0;
  return { xNm: at.xNm + dx, yNm: at.yNm + dy };
}

/** Enter at the cross: looking picks; a tool gets its first point, then its second. */
function place(map: FrameMap, at: Point): void {
  const { store } = map.context;
  const { tool } = store.now;
  if (tool === "look") {
    const p = map.projection;
    store.set({ pinned: pickAt(map, p.x(at.xNm), p.y(at.yNm), 9), at });
    return;
  }
  const key = tool === "measure" ? "line" : "region";
  const set = store.now[key];
  store.set({ [key]: set !== null && isPoint(set) ? [set[0], at] : [at, at] });
}

function nextProfile(context: Context, by: number): void {
  const { frame } = context.store.now;
  const rows = current(context).profilesOf.get(frame) ?? [];
  if (rows.length === 0) return;
  const pick = picked(context);
  const k =
    pick?.kind === "profile" && pick.frame === frame
      ? rows.findIndex((r) => must(r, "wall") === pick.wall && must(r, "profile") === pick.profile)
      : by > 0
        ? -1
        : 0;
  const r = rows[(k + by + rows.length) % rows.length];
  context.store.set({
    walls: true,
    tool: "look",
    pinned: { kind: "profile", frame, wall: must(r, "wall"), profile: must(r, "profile") },
  });
}

function nextDomain(context: Context, by: number): void {
  const rows = [...(current(context).domainsIn.get(context.store.now.frame) ?? [])].sort(
    (a, b) => must(b, "area_nm2") - must(a, "area_nm2"),
  );
  if (rows.length === 0) return;
  const pick = picked(context);
  const at = pick?.kind === "domain" ? rows.findIndex((r) => must(r, "domain") === pick.domain) : -1;
  const k = at < 0 ? (by > 0 ? -1 : 0) : at;
  const r = rows[(k + by + rows.length) % rows.length];
  context.store.set({ tool: "look", pinned: { kind: "domain", domain: must(r, "domain") } });
}
