import type { FrameDomains, TrackedDomain } from "../model/domains.js";

/** An event of one domain between frame − 1 and frame, with the pixels (of the reference grid) where it happened. */
export interface DomainEvent {
  readonly what: "birth" | "death" | "split" | "merge";
  readonly kind: "metallic" | "insulating";
  readonly frame: number;
  /** Keys row · 100000 + column on the reference grid. */
  readonly pixels: ReadonlySet<number>;
  /** Of a split or merge: the piece that kept its identity. Which of two pieces did hangs on the sizes that the field of view cuts out. */
  readonly twin: ReadonlySet<number>;
  /** Domains no smaller than what is asked about. */
  readonly large: boolean;
}

/** Pixels of one label on the reference grid, to the nearest pixel. */
function pixelsOf(f: FrameDomains, label: number, at: Shift): Set<number> {
  const out = new Set<number>();
  const { cols } = f.map;
  for (let p = 0; p < f.labels.length; p++) {
    if (f.labels[p] !== label) continue;
    out.add((Math.floor(p / cols) + at.rows + 1000) * 100000 + (p % cols) + at.cols + 1000);
  }
  return out;
}

/** Where a frame's pixel (0, 0) lies on the reference grid, in whole pixels. */
export interface Shift {
  readonly rows: number;
  readonly cols: number;
}

const STILL: Shift = { rows: 0, cols: 0 };

/** Events between two frames, told from the overlaps alone: every pair sharing half of the smaller region is joined;
 *  a region without partner is born or dies, n partners of one region are n − 1 splits or merges. Written without the tracker. */
export function eventsBetween(
  a: FrameDomains,
  b: FrameDomains,
  frame: number,
  leastPx: number,
  atA: Shift = STILL,
  atB: Shift = STILL,
): DomainEvent[] {
  const shared = new Map<string, number>();
  const size = new Map<string, number>();
  const bump = (m: Map<string, number>, key: string): void => void m.set(key, (m.get(key) ?? 0) + 1);
  for (const la of a.labels) if (la > 0) bump(size, `a${la}`);
  const { rows, cols } = b.map;
  for (let p = 0; p < b.labels.length; p++) {
    const lb = b.labels[p];
    if (lb === 0) continue;
    bump(size, `b${lb}`);
    const i = Math.floor(p / cols) + atB.rows - atA.rows;
    const j = (p % cols) + atB.cols - atA.cols;
    if (i < 0 || j < 0 || i >= rows || j >= cols) continue;
    const la = a.labels[i * cols + j];
    if (la > 0 && a.regions[la - 1].kind === b.regions[lb - 1].kind) bump(shared, `a${la} b${lb}`);
  }
  const partners = new Map<string, string[]>();
  for (const [key, n] of shared) {
    const [ka, kb] = key.split(" ");
    if (n < 0.5 * Math.min(size.get(ka) ?? 0, size.get(kb) ?? 0)) continue;
    partners.set(ka, [...(partners.get(ka) ?? []), kb]);
    partners.set(kb, [...(partners.get(kb) ?? []), ka]);
  }
  const events: DomainEvent[] = [];
  const side = (letter: "a" | "b"): void => {
    const [own, atOwn, other, atOther] = letter === "a" ? [a, atA, b, atB] : [b, atB, a, atA];
    for (const r of own.regions) {
      const found = partners.get(`${letter}${r.label}`) ?? [];
      if (found.length === 0 && !r.touchesBorder) {
        const what = letter === "b" ? "birth" : "death";
        const pixels = pixelsOf(own, r.label, atOwn);
        events.push({ what, kind: r.kind, frame, pixels, twin: new Set(), large: pixels.size >= leastPx });
      }
      if (found.length < 2) continue;
      const sizes = found.map((k) => size.get(k) ?? 0);
      const keeper = sizes.indexOf(Math.max(...sizes));
      const twin = pixelsOf(other, Number(found[keeper].slice(1)), atOther);
      const what = letter === "a" ? "split" : "merge";
      found.forEach((k, n) => {
        if (n === keeper) return;
        const pixels = pixelsOf(other, Number(k.slice(1)), atOther);
        events.push({ what, kind: r.kind, frame, pixels, twin, large: pixels.size >= leastPx });
      });
    }
  };
  side("a");
  side("b");
  return events;
}

/** The tracker's answer in the same words. */
export function eventsOf(
  domains: readonly TrackedDomain[],
  frames: readonly FrameDomains[],
  shifts: readonly Shift[],
  leastPx: number,
): DomainEvent[] {
  const events: DomainEvent[] = [];
  for (const d of domains) {
    const first = d.appearances[0];
    const last = d.appearances[d.appearances.length - 1];
    const at = (q: { frame: number; label: number }): Set<number> =>
      pixelsOf(frames[q.frame], q.label, shifts[q.frame]);
    if (d.origin === "nucleated" || d.origin === "split") {
      const pixels = at(first);
      const what = d.origin === "nucleated" ? "birth" : "split";
      events.push({ what, kind: d.kind, frame: first.frame, pixels, twin: new Set(), large: pixels.size >= leastPx });
    }
    if (d.fate === "vanished" || d.fate === "merged") {
      const pixels = at(last);
      const what = d.fate === "vanished" ? "death" : "merge";
      events.push({
        what,
        kind: d.kind,
        frame: last.frame + 1,
        pixels,
        twin: new Set(),
        large: pixels.size >= leastPx,
      });
    }
  }
  return events;
}

/** Whether two events are one: the same kind of event, frame and place. Of a split or merge either piece may be the one that the other account
 *  has kept, where it is the same region. An event of a domain that is small in the other account may be one frame off: it is near the
 *  least area, where noise decides. */
export function isAnsweredBy(e: DomainEvent, k: DomainEvent): boolean {
  return (
    k.what === e.what &&
    k.kind === e.kind &&
    Math.abs(k.frame - e.frame) <= (k.large ? 0 : 1) &&
    (overlaps(k.pixels, e.pixels) || isSame(k.twin, e.pixels) || isSame(e.twin, k.pixels))
  );
}

/** Share of the large events of `asked` that some event of `known` (of any size) answers. */
export function answered(asked: readonly DomainEvent[], known: readonly DomainEvent[]) {
  const counts: Record<string, { all: number; found: number }> = {};
  const missed: DomainEvent[] = [];
  for (const e of asked) {
    if (!e.large) continue;
    const c = (counts[e.what] ??= { all: 0, found: 0 });
    c.all++;
    if (known.some((k) => isAnsweredBy(e, k))) c.found++;
    else missed.push(e);
  }
  return { counts, missed };
}

function overlaps(a: ReadonlySet<number>, b: ReadonlySet<number>): boolean {
  for (const p of a) if (b.has(p)) return true;
  return false;
}

/** Two regions that share most of what either covers. */
function isSame(a: ReadonlySet<number>, b: ReadonlySet<number>): boolean {
  let shared = 0;
  for (const p of a) if (b.has(p)) shared++;
  return shared > 0.5 * (a.size + b.size - shared);
}
