import { current, type Context } from "./context.js";
import type { FrameMap } from "./map.js";
import { pickAt } from "./pick.js";
import { samePick, type MapView, type Point } from "./state.js";
import { zoomed } from "./view.js";

const REACH_MOUSE = 9;
const REACH_TOUCH = 18;
/** A press that moves less is a click. */
const CLICK_PX = 4;
/** Way of a finger across the map for a frame further. */
const SWIPE_PX = 16;

interface Press {
  readonly id: number;
  readonly x: number;
  readonly y: number;
  readonly from: Point;
  readonly view: MapView;
  readonly frame: number;
  moved: boolean;
}

/** Pointer on the map. Looking: click or tap picks, a drag moves an enlarged map; at full field a finger's way across goes along the loop.
 *  Measuring and marking: a drag draws. Two fingers or the wheel with Ctrl enlarge. */
export function takeMapInput(map: FrameMap): void {
  const { canvas, context } = map;
  const { store } = context;
  const fingers = new Map<number, { x: number; y: number }>();
  let press: Press | null = null;
  let pinch: { apart: number; view: MapView } | null = null;

  const place = (e: MouseEvent): { x: number; y: number } => {
    const r = canvas.getBoundingClientRect();
    return { x: e.clientX - r.left, y: e.clientY - r.top };
  };
  const apart = (): number => {
    const [a, b] = [...fingers.values()];
    return a === undefined || b === undefined ? 0 : Math.hypot(a.x - b.x, a.y - b.y);
  };

  canvas.addEventListener("pointerdown", (e) => {
    if (e.button !== 0) return;
    const at = place(e);
    fingers.set(e.pointerId, at);
    canvas.setPointerCapture(e.pointerId);
    const p = map.projection;
    if (fingers.size === 2) {
      pinch = { apart: apart(), view: p.view };
      press = null;
      return;
    }
    const { frame } = store.now;
    press = { id: e.pointerId, ...at, from: p.point(at.x, at.y), view: p.view, frame, moved: false };
  });

  canvas.addEventListener("pointermove", (e) => {
    const at = place(e);
    if (fingers.has(e.pointerId)) fingers.set(e.pointerId, at);
    if (pinch !== null && fingers.size === 2) {
      const p = map.projection;
      const [a, b] = [...fingers.values()];
      const middle = p.point((a.x + b.x) / 2, (a.y + b.y) / 2);
      store.set({ view: zoomed(p, map.fit, (apart() / pinch.apart) * (p.view.nmPerPx / pinch.view.nmPerPx), middle) });
      return;
    }
    const here = map.projection.point(at.x, at.y);
    if (press === null || press.id !== e.pointerId) {
      if (e.pointerType === "mouse") point(map, at, here);
      return;
    }
    if (!press.moved && Math.hypot(at.x - press.x, at.y - press.y) < CLICK_PX) return;
    press.moved = true;
    drag(map, press, at, here, e.pointerType);
  });

  const end = (e: PointerEvent): void => {
    fingers.delete(e.pointerId);
    if (fingers.size < 2) pinch = null;
    if (press?.id !== e.pointerId) return;
    const { x, y, moved } = press;
    press = null;
    if (moved || e.type === "pointercancel") return;
    if (store.now.tool === "look") {
      const found = pickAt(map, x, y, e.pointerType === "mouse" ? REACH_MOUSE : REACH_TOUCH);
      store.set({ pinned: samePick(found, store.now.pinned) ? null : found, at: map.projection.point(x, y) });
    }
  };
  canvas.addEventListener("pointerup", end);
  canvas.addEventListener("pointercancel", end);
  canvas.addEventListener("pointerleave", () => {
    if (press === null) store.set({ pointed: null, at: null });
  });
  canvas.addEventListener("dblclick", (e) => {
    const at = place(e);
    const p = map.projection;
    if (store.now.tool === "look") store.set({ view: zoomed(p, map.fit, e.shiftKey ? 0.5 : 2, p.point(at.x, at.y)) });
  });
  canvas.addEventListener(
    "wheel",
    (e) => {
      if (!e.ctrlKey && !e.metaKey) return; // the page scrolls
      e.preventDefault();
      const at = place(e);
      const p = map.projection;
      store.set({ view: zoomed(p, map.fit, Math.exp(-e.deltaY / 240), p.point(at.x, at.y)) });
    },
    { passive: false },
  );
  store.on(["view", "tool"], (s) => {
    // at full field a finger may scroll the page up and down; enlarged, or with a tool, the map takes all of its ways
    canvas.style.touchAction = s.view === null && s.tool === "look" ? "pan-y" : "none";
    canvas.style.cursor = s.tool === "look" ? (s.view === null ? "default" : "grab") : "crosshair";
  });
}

function point(map: FrameMap, at: { x: number; y: number }, here: Point): void {
  const { store } = map.context;
  const found = store.now.tool === "look" ? pickAt(map, at.x, at.y, REACH_MOUSE) : null;
  store.set({ at: here, ...(samePick(found, store.now.pointed) ? {} : { pointed: found }) });
}

function drag(map: FrameMap, press: Press, at: { x: number; y: number }, here: Point, pointer: string): void {
  const { store } = map.context;
  const { tool, view, compare } = store.now;
  if (tool === "measure") store.set({ line: [press.from, here], at: here });
  else if (tool === "mark") store.set({ region: [press.from, here], at: here });
  else if (compare === "split") store.set({ split: Math.min(0.98, Math.max(0.02, at.x / map.projection.width)) });
  else if (view !== null) {
    const { nmPerPx } = press.view;
    store.set({
      view: {
        xNm: press.view.xNm - (at.x - press.x) * nmPerPx,
        yNm: press.view.yNm - (at.y - press.y) * nmPerPx,
        nmPerPx: view.nmPerPx,
      },
    });
  } else if (pointer !== "mouse") stepTo(map.context, press.frame + Math.round((at.x - press.x) / SWIPE_PX));
}

export function stepTo(context: Context, frame: number): void {
  const last = current(context).frameRows.length - 1;
  context.store.set({ frame: Math.min(last, Math.max(0, frame)) });
}
