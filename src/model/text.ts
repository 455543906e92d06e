/**
 * A name from outside made fit for a terminal or a log line: control characters (terminal escape codes among them), line and
 * paragraph separators and the marks that turn the writing direction become visible escapes such as `\x1b`.
 */
export function plainText(s: string): string {
  let out = "";
  for (const ch of s) {
    const code = ch.codePointAt(0) ?? 0;
    if (!isUnsafe(code)) out += ch;
    else if (code <= 0xff) out += `\\x${code.toString(16).padStart(2, "0")}`;
    else out += `\\u${code.toString(16).padStart(4, "0")}`;
  }
  return out;
}

function isUnsafe(code: number): boolean {
  if (code < 0x20 || (code >= 0x7f && code <= 0x9f)) return true;
  if (code === 0x061c || code === 0x200e || code === 0x200f || code === 0xfeff) return true;
  if (code >= 0xd800 && code <= 0xdfff) return true; // half of a surrogate pair
  return (code >= 0x2028 && code <= 0x202e) || (code >= 0x2066 && code <= 0x2069);
}

/** The one of `words` that `word` was probably meant to be, or null: at most a third of its letters differ (at least one, two swapped count once). */
export function closestWord(word: string, words: readonly string[]): string | null {
  let best: string | null = null;
  let bestDistance = Infinity;
  for (const w of words) {
    const d = editDistance(word.toLowerCase(), w.toLowerCase());
    if (d < bestDistance) {
      best = w;
      bestDistance = d;
    }
  }
  return best !== null && bestDistance <= Math.max(1, Math.floor(Math.max(word.length, best.length) / 3)) ? best : null;
}

/** Insertions, deletions, replacements and swaps of neighbours that lead from `a` to `b` (optimal string alignment). */
function editDistance(a: string, b: string): number {
  if (Math.abs(a.length - b.length) > 20) return Infinity;
  const cols = b.length + 1;
  const d = new Uint16Array((a.length + 1) * cols);
  for (let i = 0; i <= a.length; i++) d[i * cols] = i;
  for (let j = 0; j <= b.length; j++) d[j] = j;
  for (let i = 1; i <= a.length; i++) {
    for (let j = 1; j <= b.length; j++) {
      const cost = a[i - 1] === b[j - 1] ? 0 : 1;
      let v = Math.min(d[(i - 1) * cols + j] + 1, d[i * cols + j - 1] + 1, d[(i - 1) * cols + j - 1] + cost);
      if (i > 1 && j > 1 && a[i - 1] === b[j - 2] && a[i - 2] === b[j - 1]) {
        v = Math.min(v, d[(i - 2) * cols + j - 2] + 1);
      }
      d[i * cols + j] = v;
    }
  }
  return d[a.length * cols + b.length];
}

/** `1 frame`, `3 frames`. */
export const countOf = (n: number, word: string, plural = `${word}s`): string => `${n} ${n === 1 ? word : plural}`;

/** `180 to 140 K`; `152 K` where both ends are one. */
export const rangeOf = (first: number, last: number, unit: string): string =>
  first === last ? `${first} ${unit}` : `${first} to ${last} ${unit}`;
