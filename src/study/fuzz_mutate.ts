import type { Random } from "../numerics/random.js";
import type { Kind } from "./fuzz_seeds.js";

const pick = <T>(random: Random, list: readonly T[]): T => list[random.below(list.length)];

/** A file spoilt in one to six ways, by bytes or, where it is text, by words and lines as well. */
export function spoil(content: Uint8Array, kind: Kind, random: Random, other: Uint8Array): Uint8Array {
  let bytes: Buffer = Buffer.from(content);
  const text = kind === "yaml" || kind === "table" || kind === "log" || (kind === "text" && content[0] !== 0x1f);
  for (let n = pick(random, [1, 1, 2, 3, 6]); n > 0; n--) {
    bytes =
      text && random.uniform() < 0.8
        ? Buffer.from(spoilText(bytes.toString("latin1"), random), "latin1")
        : spoilBytes(bytes, random, other);
  }
  return bytes.length > MOST_BYTES ? bytes.subarray(0, MOST_BYTES) : bytes;
}

/** Longer files than this are no other test, only a slower one. */
const MOST_BYTES = 4 << 20;

/** A place in the file; most often where the structure is. */
function place(length: number, random: Random): number {
  if (length === 0) return 0;
  const of = pick(random, [64, 256, 1024, length, length]);
  return random.uniform() < 0.15
    ? length - 1 - random.below(Math.min(length, 256))
    : random.below(Math.min(length, of));
}

const EXTREMES = [
  0, 1, 0xff, 0x7f, 0x80, 0xffff, 0x7fff, 0x8000, 0xffffffff, 0x7fffffff, 0x80000000, 0x10000, 0xfffffffe,
];

function spoilBytes(bytes: Buffer, random: Random, other: Uint8Array): Buffer {
  const at = place(bytes.length, random);
  const out = Buffer.from(bytes);
  const length = 1 + random.below(pick(random, [4, 64, 4096]));
  switch (random.below(9)) {
    case 0:
    case 1:
      if (out.length > 0) out[at] = pick(random, [0, 1, 0xff, random.below(256), out[at] ^ (1 << random.below(8))]);
      return out;
    case 2: {
      const [value, size] = [pick(random, EXTREMES), pick(random, [2, 4, 8])];
      if (at + size > out.length) return out;
      const word = Buffer.alloc(8);
      word.writeUInt32LE(value);
      if (size === 8 && random.below(2) === 0) word.writeUInt32LE(value, 4);
      const part = word.subarray(0, size);
      (random.below(2) === 0 ? part : part.reverse()).copy(out, at);
      return out;
    }
    case 3:
      return out.subarray(0, at);
    case 4:
      return Buffer.concat([out.subarray(0, at), out.subarray(at + length)]);
    case 5:
      return Buffer.concat([
        out.subarray(0, at),
        Buffer.from(Array.from({ length: Math.min(length, 64) }, () => random.below(256))),
        out.subarray(at),
      ]);
    case 6:
      return Buffer.concat([out.subarray(0, at), out.subarray(at, at + length), out.subarray(at)]);
    case 7: {
      const from = place(other.length, random);
      return Buffer.concat([out.subarray(0, at), other.subarray(from, from + length), out.subarray(at + length)]);
    }
    default: {
      const to = place(bytes.length, random);
      bytes.copy(out, to, at, Math.min(at + length, bytes.length));
      return out;
    }
  }
}

const NUMBERS = [
  "0",
  "-1",
  "-0",
  "1e309",
  "-1e309",
  "NaN",
  ".inf",
  "0x10",
  "1_000",
  "1e-320",
  "9".repeat(400),
  "99999999999999999999",
  "1,5",
  "",
  "180 K",
  "010",
  "4294967297",
  "0.1e",
];
const WORDS = [
  "\0",
  "\x1b[2J",
  "\xef\xbb\xbf",
  "\xe2\x80\xae",
  "\xff\xfe",
  "'",
  '"',
  '"""',
  ":",
  ": ",
  "- ",
  "#",
  "#0",
  "#999999",
  "#0:1",
  ",",
  ";",
  "\t",
  "\r",
  "\r\n",
  "\n",
  "\n\n",
  "~",
  "null",
  "true",
  "yes",
  "&a ",
  "*a",
  "&a [*a]",
  "!!js/function 'x'",
  "!!binary aGk=",
  "!!set {a}",
  "<<: *a",
  "? a",
  "| \n",
  "%YAML 9\n---\n",
  "---\n",
  "...\n",
  "[".repeat(3000),
  "{a: ".repeat(800),
  "../".repeat(40),
  "/etc/hosts",
  "file:///etc/hosts",
  "a.txt",
  "cooldown.yaml",
  ".",
  "..",
  "log.tsv:/a/b",
  "x".repeat(5000),
  "9999-99-99T99:99:99Z",
  "2024-02-30T25:00:00",
  "0000-00-00T00:00",
  "+99:99",
  "__proto__",
  "constructor: 1\n",
  "toString",
  "Infinity",
  "\\u0000",
];

function spoilText(text: string, random: Random): string {
  const lines = text.split("\n");
  const line = random.below(lines.length);
  const at = random.below(text.length + 1);
  switch (random.below(9)) {
    case 0: {
      const numbers = [...text.matchAll(/-?\d+(\.\d+)?/g)];
      if (numbers.length === 0) return text;
      const m = pick(random, numbers);
      return text.slice(0, m.index) + pick(random, NUMBERS) + text.slice(m.index + m[0].length);
    }
    case 1: {
      const words = [...text.matchAll(/[A-Za-z_][\w.]*/g)];
      if (words.length === 0) return text;
      const m = pick(random, words);
      const by = random.below(2) === 0 ? pick(random, WORDS) : pick(random, words)[0];
      return text.slice(0, m.index) + by + text.slice(m.index + m[0].length);
    }
    case 2:
      return text.slice(0, at) + pick(random, WORDS) + text.slice(at);
    case 3:
      return [...lines.slice(0, line), ...lines.slice(line + 1)].join("\n");
    case 4:
      return [...lines.slice(0, line), lines[line], ...lines.slice(line)].join("\n");
    case 5: {
      const out = [...lines];
      const to = random.below(lines.length);
      [out[line], out[to]] = [lines[to], lines[line]];
      return out.join("\n");
    }
    case 6:
      return text.slice(0, at) + text.slice(at + 1 + random.below(8));
    case 7: {
      const out = [...lines];
      out[line] = " ".repeat(random.below(7)) + lines[line].trimStart();
      return out.join("\n");
    }
    default: {
      const marks = [...text.matchAll(/[^\w\s]/g)];
      if (marks.length === 0) return text;
      const m = pick(random, marks);
      return (
        text.slice(0, m.index) +
        pick(random, [",", ":", "]", "}", "[", "{", "'", '"', "#", ";", "\t", ""]) +
        text.slice(m.index + 1)
      );
    }
  }
}
