import type { FrameDomains, TrackedDomain } from "../model/domains.js";

/** An event of one domain between frame − 1 and frame, with the pixels (of the reference grid) where it happened. */
export interface DomainEvent {
  readonly what: "birth" | "death" | "split" | "merge";
  readonly kind: "metallic" | "insulating";
  readonly frame: number;
  /** Keys row · 100000 + column on the reference grid. */
  readonly pixels: ReadonlySet<number>;
  /** The piece that kept its identity, where the two are so alike in size that either might have. */
  readonly twin: ReadonlySet<number>;
  /** Domains no smaller than what is asked about. */
  readonly large: boolean;
}

/** Pixels of one label on the reference grid, to the nearest pixel. */
export function pixelsOf(f: FrameDomains, label: number, shiftRows: number, shiftCols: number): Set<number> {
  const out = new Set<number>();
  const { cols } = f.map;
  for (let p = 0; p < f.labels.length; p++) {
    if (f.labels[p] !== label) continue;
    out.add((Math.floor(p / cols) + shiftRows + 1000) * 100000 + (p % cols) + shiftCols + 1000);
  }
  return out;
}

/** Events between two frames on one grid, told from the overlaps alone: every pair sharing half of the smaller region is joined;
 *  a region without partner is born or dies, n partners of one region are n − 1 splits or merges. Written without the tracker. */
export function eventsBetween(a: FrameDomains, b: FrameDomains, frame: number, leastPx: number): DomainEvent[] {
  const shared = new Map<string, number>();
  const size = new Map<string, number>();
  const bump = (m: Map<string, number>, key: string): void => void m.set(key, (m.get(key) ?? 0) + 1);
  for (let p = 0; p < a.labels.length; p++) {
    const la = a.labels[p];
    const lb = b.labels[p];
    if (la > 0) bump(size, `a${la}`);
    if (lb > 0) bump(size, `b${lb}`);
    if (la > 0 && lb > 0 && a.regions[la - 1].kind === b.regions[lb - 1].kind) bump(shared, `a${la} b${lb}`);
  }
  const partners = new Map<string, string[]>();
  for (const [key, n] of shared) {
    const [ka, kb] = key.split(" ");
    if (n < 0.5 * Math.min(size.get(ka) ?? 0, size.get(kb) ?? 0)) continue;
    partners.set(ka, [...(partners.get(ka) ?? []), kb]);
    partners.set(kb, [...(partners.get(kb) ?? []), ka]);
  }
  const events: DomainEvent[] = [];
  const side = (own: FrameDomains, other: FrameDomains, letter: "a" | "b"): void => {
    for (const r of own.regions) {
      const name = `${letter}${r.label}`;
      const found = partners.get(name) ?? [];
      if (found.length === 0 && !r.touchesBorder) {
        const what = letter === "b" ? "birth" : "death";
        const pixels = pixelsOf(own, r.label, 0, 0);
        events.push({ what, kind: r.kind, frame, pixels, twin: new Set(), large: pixels.size >= leastPx });
      }
      if (found.length < 2) continue;
      const sizes = found.map((k) => size.get(k) ?? 0);
      const keeper = sizes.indexOf(Math.max(...sizes));
      found.forEach((k, n) => {
        if (n === keeper) return;
        const label = Number(k.slice(1));
        const pixels = pixelsOf(other, label, 0, 0);
        const what = letter === "a" ? "split" : "merge";
        const alike = pixels.size > 0.5 * sizes[keeper];
        const twin = alike ? pixelsOf(other, Number(found[keeper].slice(1)), 0, 0) : new Set<number>();
        events.push({ what, kind: r.kind, frame, pixels, twin, large: pixels.size >= leastPx });
      });
    }
  };
  side(a, b, "a");
  side(b, a, "b");
  return events;
}

/** The tracker's answer in the same words. */
export function eventsOf(
  domains: readonly TrackedDomain[],
  frames: readonly FrameDomains[],
  shifts: readonly { rows: number; cols: number }[],
  leastPx: number,
): DomainEvent[] {
  const events: DomainEvent[] = [];
  for (const d of domains) {
    const first = d.appearances[0];
    const last = d.appearances[d.appearances.length - 1];
    const at = (q: { frame: number; label: number }): Set<number> =>
      pixelsOf(frames[q.frame], q.label, shifts[q.frame].rows, shifts[q.frame].cols);
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

/** Share of the large events of `asked` that some event of `known` (of any size) answers: same kind of event, frame and place.
 *  An event of a domain that is small there may be one frame off: it is near the least area, where noise decides. */
export function answered(asked: readonly DomainEvent[], known: readonly DomainEvent[]) {
  const counts: Record<string, { all: number; found: number }> = {};
  const missed: DomainEvent[] = [];
  for (const e of asked) {
    if (!e.large) continue;
    const c = (counts[e.what] ??= { all: 0, found: 0 });
    c.all++;
    const hit = known.some(
      (k) =>
        k.what === e.what &&
        k.kind === e.kind &&
        Math.abs(k.frame - e.frame) <= (k.large ? 0 : 1) &&
        (overlaps(k.pixels, e.pixels) || overlaps(k.twin, e.pixels) || overlaps(e.twin, k.pixels)),
    );
    if (hit) c.found++;
    else missed.push(e);
  }
  return { counts, missed };
}

function overlaps(a: ReadonlySet<number>, b: ReadonlySet<number>): boolean {
  for (const p of a) if (b.has(p)) return true;
  return false;
}
