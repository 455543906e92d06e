import type { Analysis } from "../model/analysis.js";
import { WARNINGS, type Notice } from "../model/cooldown.js";
import { plainText } from "../model/text.js";
import { say } from "./say.js";

/** How a notice is announced. */
export const noticeWord = (code: string): string => (WARNINGS.has(code) ? "warning" : "note");

export const fixed = (v: number | null, digits: number): string => (v === null ? "–" : v.toFixed(digits));

/** `150.1 K (149.2 to 151.0)`, or why there is none. */
export function intervalText(
  v: number | null,
  low: number | null,
  high: number | null,
  unit: string,
  digits = 1,
): string {
  if (v === null) return "none (no such series, or one half not crossed)";
  const range = low === null || high === null ? "" : ` (${low.toFixed(digits)} to ${high.toFixed(digits)})`;
  return `${v.toFixed(digits)} ${unit}${range}`;
}

/** A few lines on what an analysis found. */
export function loopText(a: Analysis): string {
  const lines = a.loops.map(
    (l) =>
      `  cycle ${l.cycle}: half cooling ${intervalText(l.coolingHalfK.value, l.coolingHalfK.low, l.coolingHalfK.high, "K")}, ` +
      `warming ${intervalText(l.warmingHalfK.value, l.warmingHalfK.low, l.warmingHalfK.high, "K")}, ` +
      `width ${intervalText(l.widthK.value, l.widthK.low, l.widthK.high, "K")}${l.complete ? "" : ", incomplete"}`,
  );
  const verdicts = new Map<string, number>();
  for (const f of a.frames) verdicts.set(f.verdict, (verdicts.get(f.verdict) ?? 0) + 1);
  const placed = a.frames.filter((f) => f.drift.xNm !== null).length;
  const profiles = a.frames.flatMap((f) => f.profiles);
  const sound = profiles.filter((p) => p.flag === "");
  const fringes = a.frames.flatMap((f) => f.fringes);
  lines.push(
    `  frames: ${[...verdicts].map(([k, n]) => `${n} ${k}`).join(", ")}; ${placedText(placed, a.frames.length)}`,
    `  walls: ${sound.length} sound profiles of ${profiles.length}, ${a.cooldown.tip === null ? "apparent widths only" : `${sound.filter((p) => p.widthNm !== null).length} resolved`}; ` +
      `fringes on ${fringes.filter((t) => t.detected).length} of ${fringes.length} stretches tested; ${a.domains.length} domains tracked`,
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

/** Everything skipped, excluded or doubtful: counted by kind, each said once with its frames. */
export function sayNotices(notices: readonly Notice[]): void {
  const byText = new Map<string, { code: string; frames: number[] }>();
  for (const n of notices) {
    const known = byText.get(n.message);
    if (known !== undefined) {
      if (n.frame !== null) known.frames.push(n.frame);
    } else byText.set(n.message, { code: n.code, frames: n.frame === null ? [] : [n.frame] });
  }
  for (const [message, { code, frames }] of byText) {
    const at =
      frames.length === 0 ? "" : frames.length === 1 ? `frame ${frames[0]}: ` : `frames ${frames.join(", ")}: `;
    say(`${noticeWord(code)}: ${at}${plainText(message)}`);
  }
}
