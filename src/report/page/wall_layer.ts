import { hexOf } from "../../figures/colour.js";
import { WIDTH_MAP } from "../../figures/colour_maps.js";
import { must, num, word, type Row } from "../../figures/rows.js";
import type { Cooldown } from "./cooldown.js";
import { standing, type Frame, type Wall } from "./frames.js";
import type { Projection } from "./view.js";

/** How a stretch of wall is drawn; each kind has a line of its own, so that no colour is needed to tell them apart. */
export type Look = "sound" | "limit" | "flagged" | "none";

export const LOOKS: Readonly<
  Record<Look, { readonly dash: readonly number[]; readonly width: number; readonly means: string }>
> = {
  sound: { dash: [], width: 3, means: "resolved: colour is the width" },
  limit: { dash: [7, 5], width: 3, means: "dashed: upper limit only" },
  flagged: { dash: [1.5, 4.5], width: 2.6, means: "dotted: flagged, not in the statistics" },
  none: { dash: [], width: 1, means: "thin: no profile here" },
};

interface Piece {
  readonly look: Look;
  readonly colour: string;
  /** Points from … to of the wall. */
  readonly from: number;
  readonly to: number;
}

interface Drawn {
  readonly wall: Wall;
  readonly pieces: readonly Piece[];
  /** Short strokes beside the wall where a fringe was found, on its side: interleaved x0, y0, x1, y1 directions at a point. */
  readonly ticks: readonly { readonly at: number; readonly dx: number; readonly dy: number }[];
}

const UNDER = "#1c1c1c";
const PLAIN = "#ffffff";
const kept = new WeakMap<Frame, readonly Drawn[]>();

/** Widths that the colours run over: the middle 96 % of the resolved ones of the cooldown. */
export function widthRange(c: Cooldown): { low: number; high: number } | null {
  const widths = c.tables.walls
    .filter((r) => standing(r) === "sound")
    .map((r) => must(r, "width_nm"))
    .sort((a, b) => a - b);
  if (widths.length === 0) return null;
  const [low, high] = [0.02, 0.98].map((q) => widths[Math.round(q * (widths.length - 1))]);
  return high > low ? { low, high } : { low: 0.9 * low, high: 1.1 * high };
}

/** Draws the walls of a frame.
 *  @param plain one colour for all of it: the walls of another frame, laid over for comparison */
export function drawWalls(
  to: CanvasRenderingContext2D,
  p: Projection,
  cooldown: Cooldown,
  range: { low: number; high: number } | null,
  frame: Frame,
  plain: string | null = null,
): void {
  const d = cooldown.drift(frame.frame) ?? { xNm: 0, yNm: 0 };
  const x = (w: Wall, k: number): number => p.x(w.points[2 * k] + d.xNm);
  const y = (w: Wall, k: number): number => p.y(w.points[2 * k + 1] + d.yNm);
  const trace = (w: Wall, from: number, to_: number): void => {
    to.beginPath();
    for (let k = from; k <= to_; k++) to.lineTo(x(w, k), y(w, k));
  };
  to.save();
  to.lineJoin = "round";
  to.lineCap = "round";
  if (plain !== null) {
    for (const w of frame.walls)
      for (const [colour, width] of [
        [PLAIN, 4],
        [plain, 2],
      ] as const) {
        trace(w, 0, w.arcNm.length - 1);
        if (w.closed) to.closePath();
        Object.assign(to, { strokeStyle: colour, lineWidth: width });
        to.stroke();
      }
    to.restore();
    return;
  }
  const drawn = piecesOf(cooldown, range, frame);
  for (const { wall, pieces, ticks } of drawn) {
    for (const t of ticks) {
      const [px, py] = [x(wall, t.at), y(wall, t.at)];
      for (const [colour, width] of [
        [UNDER, 4],
        [PLAIN, 2],
      ] as const) {
        to.beginPath();
        to.moveTo(px + 3 * t.dx, py + 3 * t.dy);
        to.lineTo(px + 9 * t.dx, py + 9 * t.dy);
        Object.assign(to, { strokeStyle: colour, lineWidth: width });
        to.stroke();
      }
    }
    for (const piece of pieces) {
      trace(wall, piece.from, piece.to);
      Object.assign(to, { strokeStyle: UNDER, lineWidth: LOOKS[piece.look].width + 2 });
      to.setLineDash([]);
      to.stroke();
    }
    to.lineCap = "butt";
    for (const piece of pieces) {
      trace(wall, piece.from, piece.to);
      Object.assign(to, { strokeStyle: piece.colour, lineWidth: LOOKS[piece.look].width });
      to.setLineDash([...LOOKS[piece.look].dash]);
      to.stroke();
    }
    to.setLineDash([]);
    to.lineCap = "round";
  }
  to.restore();
}

function piecesOf(cooldown: Cooldown, range: { low: number; high: number } | null, frame: Frame): readonly Drawn[] {
  const known = kept.get(frame);
  if (known !== undefined) return known;
  const profiles = cooldown.profilesOf.get(frame.frame) ?? [];
  const fringes = (cooldown.fringesOf.get(frame.frame) ?? []).filter((r) => num(r, "detected") === 1);
  const made = frame.walls.map((wall): Drawn => {
    const own = profiles.filter((r) => must(r, "wall") === wall.wall);
    return { wall, pieces: piecesAlong(wall, own, range), ticks: ticksAlong(wall, own, fringes) };
  });
  kept.set(frame, made);
  return made;
}

/** Each part of a wall takes the look of the profile that it belongs to. */
function piecesAlong(wall: Wall, profiles: readonly Row[], range: { low: number; high: number } | null): Piece[] {
  const pieces: Piece[] = [];
  const n = wall.arcNm.length;
  let current = -2;
  for (let k = 0; k + 1 < n; k++) {
    const middle = (wall.arcNm[k] + wall.arcNm[k + 1]) / 2;
    const owner = ownerAt(profiles, middle);
    const last = pieces[pieces.length - 1];
    if (owner === current && last !== undefined) {
      pieces[pieces.length - 1] = { ...last, to: k + 1 };
      continue;
    }
    current = owner;
    const row = profiles[owner];
    const look: Look = row === undefined ? "none" : standing(row);
    pieces.push({ look, colour: look === "sound" ? widthColour(row, range) : PLAIN, from: k, to: k + 1 });
  }
  return pieces;
}

/** Index of the profile whose stretch of wall holds a place along it, −1 where none does. */
function ownerAt(profiles: readonly Row[], arcNm: number): number {
  let best = -1;
  let bestOff = Infinity;
  profiles.forEach((r, k) => {
    const off = Math.abs(must(r, "arc_nm") - arcNm);
    if (off < bestOff && off <= 0.55 * must(r, "stretch_nm")) {
      best = k;
      bestOff = off;
    }
  });
  return best;
}

export function widthColour(r: Row, range: { low: number; high: number } | null): string {
  const w = num(r, "width_nm");
  if (w === null || range === null) return PLAIN;
  return hexOf(WIDTH_MAP(Math.min(1, Math.max(0, (w - range.low) / (range.high - range.low)))));
}

function ticksAlong(wall: Wall, profiles: readonly Row[], fringes: readonly Row[]): Drawn["ticks"] {
  const out: { at: number; dx: number; dy: number }[] = [];
  for (const f of fringes) {
    if (must(f, "wall") !== wall.wall) continue;
    const sign = word(f, "side") === "metallic" ? 1 : -1;
    let last = -Infinity;
    for (let k = 0; k < wall.arcNm.length; k++) {
      const arc = wall.arcNm[k];
      if (arc < must(f, "arc_from_nm") || arc > must(f, "arc_to_nm") || arc - last < wall.lengthNm / 400 + 45) continue;
      const near = nearestAlong(profiles, arc);
      if (near === null) continue;
      last = arc;
      const turn = (must(near, "normal_deg") * Math.PI) / 180;
      out.push({ at: k, dx: sign * Math.cos(turn), dy: -sign * Math.sin(turn) });
    }
  }
  return out;
}

function nearestAlong(profiles: readonly Row[], arcNm: number): Row | null {
  return profiles.reduce<Row | null>(
    (best, r) =>
      best === null || Math.abs(must(r, "arc_nm") - arcNm) < Math.abs(must(best, "arc_nm") - arcNm) ? r : best,
    null,
  );
}

/** The profile at a wall near a point of the map, CSS pixels; null where no wall is within reach. */
export function profileNear(
  p: Projection,
  cooldown: Cooldown,
  frame: Frame,
  x: number,
  y: number,
  reachPx: number,
): Row | null {
  const d = cooldown.drift(frame.frame) ?? { xNm: 0, yNm: 0 };
  let best = reachPx * reachPx;
  let found: { wall: number; arcNm: number } | null = null;
  for (const w of frame.walls)
    for (let k = 0; k < w.arcNm.length; k++) {
      const dx = p.x(w.points[2 * k] + d.xNm) - x;
      const dy = p.y(w.points[2 * k + 1] + d.yNm) - y;
      if (dx * dx + dy * dy >= best) continue;
      best = dx * dx + dy * dy;
      found = { wall: w.wall, arcNm: w.arcNm[k] };
    }
  if (found === null) return null;
  const { wall, arcNm } = found;
  return nearestAlong(
    (cooldown.profilesOf.get(frame.frame) ?? []).filter((r) => must(r, "wall") === wall),
    arcNm,
  );
}
