/** A date with a time, to the minute or finer; with or without an offset from UTC. */
export const ISO_TIME = /^\d{4}-\d\d-\d\d[T ]\d\d:\d\d(:\d\d([.,]\d+)?)?(Z|[+-]\d\d(:?\d\d)?)?$/;

/** Milliseconds since 1970 UTC of a time as ISO 8601; without an offset as if the machine's zone were meant. NaN: no time. */
export function parseTime(s: string): number {
  return Date.parse(normal(s));
}

const normal = (s: string): string =>
  s
    .replace(" ", "T")
    .replace(",", ".")
    .replace(/([+-]\d\d)(\d\d)?$/, (whole, h: string, m: string | undefined, at: number) =>
      // Only behind a time: the last two numbers of a date look alike.
      at > 10 ? `${h}:${m ?? "00"}` : whole,
    );

/** What a local time means: an offset from UTC, a zone, or nothing. */
export type TimeZone = (localMs: number) => readonly number[];

/**
 * A zone by its name ("Europe/Paris") or a fixed offset ("+02:00", "Z"). The function gives the offsets from UTC, in ms, that a local time can
 * have there: one, two where the clock was put back, none where it was put forward. null: no such zone.
 */
export function timeZone(name: string): TimeZone | null {
  const fixed = /^(?:UTC)?([+-])(\d\d):?(\d\d)?$/.exec(name);
  if (fixed !== null) {
    const [, sign, h, m] = fixed;
    const offset = (sign === "-" ? -1 : 1) * (Number(h) * 60 + Number(m ?? 0)) * 60_000;
    return Number(h) <= 14 && Number(m ?? 0) < 60 ? () => [offset] : null;
  }
  if (name === "Z" || name === "UTC") return () => [0];
  let format: Intl.DateTimeFormat;
  try {
    format = new Intl.DateTimeFormat("en-US", {
      timeZone: name,
      hourCycle: "h23",
      year: "numeric",
      month: "numeric",
      day: "numeric",
      hour: "numeric",
      minute: "numeric",
      second: "numeric",
      era: "short",
    });
  } catch {
    return null;
  }
  const offsetAt = (utcMs: number): number => {
    const parts = new Map(format.formatToParts(new Date(utcMs)).map((p) => [p.type, Number(p.value)]));
    const field = (type: Intl.DateTimeFormatPartTypes): number => parts.get(type) ?? 0;
    const local = Date.UTC(
      field("year"),
      field("month") - 1,
      field("day"),
      field("hour"),
      field("minute"),
      field("second"),
    );
    return local - Math.floor(utcMs / 1000) * 1000;
  };
  const day = 86_400_000;
  return (localMs) => {
    const candidates = new Set([offsetAt(localMs - day), offsetAt(localMs + day)]);
    return [...candidates].filter((offset) => offsetAt(localMs - offset) === offset);
  };
}

export type TimeResult =
  | { readonly ms: number }
  /** Why the time cannot be placed: no offset and no zone, a time that the clock showed twice, one that it never showed, no time. */
  | { readonly fault: "no-zone" | "twice" | "never" | "no-time" };

/** Milliseconds since 1970 UTC of a time with an offset, or of a local one in `zone`. */
export function instant(text: string, zone: TimeZone | null): TimeResult {
  if (!ISO_TIME.test(text)) return { fault: "no-time" };
  const zoned = /(Z|[+-]\d\d(:?\d\d)?)$/.test(text.slice(11));
  const ms = Date.parse(zoned ? normal(text) : `${normal(text)}Z`);
  if (Number.isNaN(ms)) return { fault: "no-time" };
  if (zoned) return { ms };
  if (zone === null) return { fault: "no-zone" };
  const offsets = zone(ms);
  if (offsets.length === 1) return { ms: ms - offsets[0] };
  return { fault: offsets.length === 0 ? "never" : "twice" };
}
