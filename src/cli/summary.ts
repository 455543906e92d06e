import type { Analysis } from "../model/analysis.js";
import type { Notice } from "../model/cooldown.js";
import { countOf } from "../model/text.js";
import { noticeLines } from "./notice_lines.js";
import { say } from "./say.js";

export const fixed = (v: number | null, digits: number): string => (v === null ? "–" : v.toFixed(digits));

/** `150.1 K (149.2 to 151.0)`, or why there is none. */
export function intervalText(
  v: number | null,
  low: number | null,
  high: number | null,
  none: string,
  digits = 1,
): string {
  if (v === null) return `none (${none})`;
  const range = low === null || high === null ? "" : ` (${low.toFixed(digits)} to ${high.toFixed(digits)})`;
  return `${v.toFixed(digits)} K${range}`;
}

/** Why half temperatures and the width of a cycle are missing, where they are.
 *  @param frames of that cycle; `fraction` null where there is none */
export function noHalf(frames: readonly { readonly branch: string; readonly fraction: number | null }[]): {
  readonly cooling: string;
  readonly warming: string;
  readonly width: string;
} {
  const why = (branch: string): string => {
    const own = frames.filter((f) => f.branch === branch);
    if (own.length === 0) return `no ${branch} series`;
    return own.some((f) => f.fraction !== null) ? "one half not crossed" : "no metallic fraction";
  };
  return { cooling: why("cooling"), warming: why("warming"), width: "it needs both half temperatures" };
}

/** A few lines on what an analysis found. */
export function loopText(a: Analysis): string {
  const lines = a.loops.map((l) => {
    const none = noHalf(
      a.cooldown.frames
        .filter((f) => f.cycle === l.cycle)
        .map((f) => ({ branch: f.branch, fraction: a.frames[f.frame].fraction?.value ?? null })),
    );
    return (
      `  cycle ${l.cycle}: half cooling ${intervalText(l.coolingHalfK.value, l.coolingHalfK.low, l.coolingHalfK.high, none.cooling)}, ` +
      `warming ${intervalText(l.warmingHalfK.value, l.warmingHalfK.low, l.warmingHalfK.high, none.warming)}, ` +
      `width ${intervalText(l.widthK.value, l.widthK.low, l.widthK.high, none.width)}${l.complete ? "" : ", incomplete"}`
    );
  });
  const verdicts = new Map<string, number>();
  const used = a.frames.filter((f) => a.cooldown.frames[f.frame].excluded === undefined);
  for (const f of used) verdicts.set(f.verdict, (verdicts.get(f.verdict) ?? 0) + 1);
  if (used.length < a.frames.length) verdicts.set("left out", a.frames.length - used.length);
  const placed = used.filter((f) => f.drift.xNm !== null).length;
  const profiles = a.frames.flatMap((f) => f.profiles);
  const sound = profiles.filter((p) => p.flag === "");
  const fringes = a.frames.flatMap((f) => f.fringes);
  lines.push(
    `  frames: ${[...verdicts].map(([k, n]) => `${n} ${k}`).join(", ")}; ${placedText(placed, used.length)}`,
    `  walls: ${countOf(sound.length, "sound profile")} of ${profiles.length}, ${a.cooldown.tip === null ? "apparent widths only" : `${sound.filter((p) => p.widthNm !== null).length} resolved`}; ` +
      `fringes on ${fringes.filter((t) => t.detected).length} of ${countOf(fringes.length, "stretch", "stretches")} tested; ${countOf(a.domains.length, "domain")} tracked`,
  );
  const flags = new Map<string, number>();
  for (const p of profiles) if (p.flag !== "") flags.set(p.flag, (flags.get(p.flag) ?? 0) + 1);
  if (flags.size > 0) lines.push(`  left out of the widths: ${[...flags].map(([k, n]) => `${n} ${k}`).join(", ")}`);
  return `${lines.join("\n")}\n`;
}

/** The first frame is where the coordinates begin: it has its place even where no other could be placed against it. */
function placedText(placed: number, frames: number): string {
  if (placed === 1 && frames > 1) return `none of the ${frames - 1} after the first placed against it`;
  return `${placed} of ${frames} placed`;
}

/** Everything skipped, excluded or doubtful, each remark said once with its frames. */
export function sayNotices(notices: readonly Notice[]): void {
  for (const line of noticeLines(notices)) say(line);
}
