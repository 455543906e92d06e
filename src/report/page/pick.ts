import { must } from "../../figures/rows.js";
import { current } from "./context.js";
import { pixelAt, type Frame } from "./frames.js";
import type { FrameMap } from "./map.js";
import type { Picked } from "./state.js";
import { profileNear } from "./wall_layer.js";

/** What lies at a point of the map, CSS pixels: a wall within reach, else the domain. */
export function pickAt(map: FrameMap, x: number, y: number, reachPx: number): Picked | null {
  const frame = map.frameAt(x);
  if (frame === null) return null;
  const c = current(map.context);
  if (map.context.store.now.walls) {
    const row = profileNear(map.projection, c, frame, x, y, reachPx);
    if (row !== null)
      return { kind: "profile", frame: frame.frame, wall: must(row, "wall"), profile: must(row, "profile") };
  }
  const domain = domainAt(map, frame, x, y);
  return domain === null ? null : { kind: "domain", domain };
}

export function domainAt(map: FrameMap, frame: Frame, x: number, y: number): number | null {
  const c = current(map.context);
  const d = c.drift(frame.frame) ?? { xNm: 0, yNm: 0 };
  const at = map.projection.point(x, y);
  const k = pixelAt(frame, at.xNm - d.xNm, at.yNm - d.yNm, c.info.pixelXNm, c.info.pixelYNm);
  const code = k < 0 ? 0 : (frame.domains?.[k] ?? 0);
  return code === 0 ? null : code - 1;
}
