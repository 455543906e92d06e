import { inflateSync } from "node:zlib";
import { lineLength } from "../model/line_length.js";
import { INSULATING, METALLIC, NO_STATE } from "../model/signal.js";
import type { Db } from "./open.js";
import { floatsOf } from "./pictures.js";

interface FrameRow {
  readonly analysis_id: number;
  readonly place: string;
  readonly frame: number;
  readonly verdict: string;
  readonly metallic_domains: number | null;
  readonly insulating_domains: number | null;
  readonly map_rows: number;
  readonly map_cols: number;
  readonly map_deflated: Uint8Array;
  readonly pixel_nm2: number;
}

interface Found {
  readonly looked: number;
  readonly problems: readonly string[];
}

/** Sizes in pixels of the smallest regions that were taken for domains, and of the largest that were not, of one analysis. */
interface LeastDomain {
  kept: number;
  dropped: number;
}

/** Unpacks every map and finds its connected regions anew (metallic ones join over corners, insulating ones over sides only). The
 *  largest regions of each state must be as many as the frame counts domains, one least size must tell them from the rest in the whole
 *  analysis, and each tracked domain must have the area of one of them: then the areas add up to the map less its specks. */
export function mapProblems(db: Db): Found {
  const problems: string[] = [];
  const least = new Map<number, LeastDomain>();
  const places = new Map<number, string>();
  const areas = db
    .prepare<[number, number, string], number>(
      `SELECT s.area_nm2 FROM domain_appearance s JOIN domain d ON d.analysis_id = s.analysis_id AND d.domain = s.domain
       WHERE s.analysis_id = ? AND s.frame = ? AND d.kind = ?`,
    )
    .pluck();
  const rows = db.prepare<[], FrameRow>(
    `SELECT f.analysis_id, c.name || ', analysis ' || a.id AS place, f.frame, f.verdict, f.metallic_domains, f.insulating_domains,
            f.map_rows, f.map_cols, f.map_deflated, a.pixel_x_nm * a.pixel_y_nm AS pixel_nm2
     FROM frame f JOIN analysis a ON a.id = f.analysis_id JOIN cooldown c ON c.id = a.cooldown_id`,
  );
  let looked = 0;
  for (const f of rows.iterate()) {
    looked++;
    const at = `${f.place}, frame ${f.frame}`;
    const states = unpack(f);
    if (typeof states === "string") {
      problems.push(`${at}: ${states}`);
      continue;
    }
    const bounds = least.get(f.analysis_id) ?? { kept: Infinity, dropped: 0 };
    least.set(f.analysis_id, bounds);
    places.set(f.analysis_id, f.place);
    for (const [kind, state, counted] of [
      ["metallic", METALLIC, f.metallic_domains],
      ["insulating", INSULATING, f.insulating_domains],
    ] as const) {
      const tracked = areas.all(f.analysis_id, f.frame, kind);
      if (counted === null) {
        if (f.verdict !== "undecided") problems.push(`${at}: ${kind} domains were not counted`);
        continue;
      }
      const sizes = regionSizes(states, f.map_rows, f.map_cols, state);
      if (counted > sizes.length) {
        problems.push(`${at}: says ${counted} ${kind} domains, its map has ${sizes.length} regions`);
        continue;
      }
      const domains = sizes.slice(0, counted);
      bounds.kept = Math.min(bounds.kept, domains.at(-1) ?? Infinity);
      bounds.dropped = Math.max(bounds.dropped, sizes[counted] ?? 0);
      for (const area of tracked) {
        const k = domains.findIndex((n) => Math.abs(n * f.pixel_nm2 - area) <= 1e-9 * area);
        if (k < 0) problems.push(`${at}: no ${kind} region of its map has the ${area} nm2 of a tracked domain`);
        else domains.splice(k, 1);
      }
    }
  }
  for (const [id, b] of least)
    if (b.dropped >= b.kept)
      problems.push(
        `${places.get(id) ?? ""}: a region of ${b.dropped} pixels is no domain, one of ${b.kept} is: no least area tells them apart`,
      );
  return { looked, problems };
}

function unpack(f: FrameRow): Uint8Array | string {
  const pixels = f.map_rows * f.map_cols;
  let states: Uint8Array;
  try {
    // One byte more than expected is enough to know that it is too long.
    states = inflateSync(f.map_deflated, { maxOutputLength: Math.max(1, pixels + 1) });
  } catch (e) {
    return `its map does not unpack: ${e instanceof Error ? e.message : String(e)}`;
  }
  if (states.length !== pixels) return `its map has ${states.length} pixels, not ${f.map_rows} × ${f.map_cols}`;
  for (const s of states)
    if (s !== INSULATING && s !== METALLIC && s !== NO_STATE) return `its map has a pixel of ${s}`;
  return states;
}

/** Sizes in pixels of the connected regions of one state, largest first: runs along the rows, joined with those of the row before that
 *  they touch (metallic ones over corners too). */
export function regionSizes(states: Uint8Array, rows: number, cols: number, state: number): number[] {
  const reach = state === METALLIC ? 1 : 0;
  const parent: number[] = [];
  const size: number[] = [];
  const rootOf = (run: number): number => {
    let r = run;
    while (parent[r] !== r) r = parent[r] = parent[parent[r]];
    return r;
  };
  // Runs of the row before: first column, column after the last, number; in turn.
  let before: number[] = [];
  for (let i = 0; i < rows; i++) {
    const row: number[] = [];
    let k = 0;
    const end = (i + 1) * cols;
    for (let p = i * cols; p < end; p++) {
      if (states[p] !== state) continue;
      const from = p;
      while (p < end && states[p] === state) p++;
      const run = parent.length;
      parent.push(run);
      size.push(p - from);
      const first = from - i * cols;
      const last = p - i * cols;
      while (k < before.length && before[k + 1] + reach <= first) k += 3;
      for (let m = k; m < before.length && before[m] < last + reach; m += 3) {
        const other = rootOf(before[m + 2]);
        const own = rootOf(run);
        if (other === own) continue;
        parent[other] = own;
        size[own] += size[other];
      }
      row.push(first, last, run);
    }
    before = row;
  }
  return size.filter((_n, run) => parent[run] === run).sort((x, y) => y - x);
}

interface WallRow {
  readonly place: string;
  readonly frame: number;
  readonly wall: number;
  readonly closed: number;
  readonly length_nm: number;
  readonly points: Uint8Array;
}

/** Each wall's points must be whole pairs of finite numbers, and the line through them as long as the wall is said to be. */
export function wallProblems(db: Db): Found {
  const problems: string[] = [];
  let looked = 0;
  const rows = db.prepare<[], WallRow>(
    `SELECT c.name || ', analysis ' || a.id AS place, w.frame, w.wall, w.closed, w.length_nm, w.points
     FROM wall w JOIN analysis a ON a.id = w.analysis_id JOIN cooldown c ON c.id = a.cooldown_id`,
  );
  for (const w of rows.iterate()) {
    looked++;
    const wrong = lineProblem(w);
    if (wrong !== null) problems.push(`${w.place}, frame ${w.frame}, wall ${w.wall}: ${wrong}`);
  }
  return { looked, problems };
}

/** All points of a wall are kept, as single-precision numbers: its length follows from them as it did at ingest, but for their rounding.
 *  A point off by `e` changes the length by no more than twice that, whichever way its neighbours lie, and the turning angles, which
 *  enter squared, by less; `e` is half a unit in the last place of each of two coordinates. */
function roundingNm(points: Float32Array): number {
  let largest = 1;
  for (const x of points) largest = Math.max(largest, Math.abs(x));
  return (points.length / 2) * 2 * Math.SQRT2 * largest * 2 ** -24;
}

function lineProblem(w: WallRow): string | null {
  const { points } = w;
  if (points.byteLength % 8 !== 0 || points.byteLength < 16) return `${points.byteLength} bytes are no line of points`;
  const line = floatsOf(points);
  const lost = line.findIndex((v) => !Number.isFinite(v)) >> 1;
  if (lost >= 0) return `point ${lost} is ${line[2 * lost]}, ${line[2 * lost + 1]}`;
  const { length } = lineLength(line, w.closed === 1);
  if (Math.abs(length - w.length_nm) <= roundingNm(line)) return null;
  return `says ${w.length_nm.toFixed(2)} nm, its points make ${length.toFixed(2)} nm`;
}
