import type { Cell, Row } from "../figures/rows.js";

/* Numbers as bytes and back. The same file serves both sides: the program that packs and the page that unpacks. */

/** One column of a packed table. Its numbers are kept in single precision (seven digits), or in double where `wide`; words as places in a list. */
export interface ColumnHead {
  readonly name: string;
  readonly wide?: boolean;
  readonly words?: readonly string[];
}

export interface TableHead {
  readonly rows: number;
  readonly columns: readonly ColumnHead[];
}

/** A table as bytes, column after column, each with the first bytes of all its numbers, then the second ones, …: so they deflate best.
 *  An empty cell is a NaN.
 *  @param columns which columns, in which order
 *  @param wide    true: numbers keep all their digits */
export function encodeTable(
  rows: readonly Row[],
  columns: readonly string[],
  wide: boolean,
): { head: TableHead; bytes: Uint8Array } {
  const heads: ColumnHead[] = [];
  const parts: Uint8Array[] = [];
  for (const name of columns) {
    const cells = rows.map((r) => r[name] ?? null);
    const words = cells.some((c) => typeof c === "string")
      ? [...new Set(cells.filter((c): c is string => typeof c === "string"))]
      : null;
    const place = new Map(words?.map((w, k) => [w, k]));
    const values = cells.map((c) => (c === null ? Number.NaN : typeof c === "number" ? c : (place.get(c) ?? 0)));
    const double = wide && words === null;
    heads.push({ name, ...(double ? { wide: true } : {}), ...(words === null ? {} : { words }) });
    parts.push(planes(values, double ? 8 : 4));
  }
  return { head: { rows: rows.length, columns: heads }, bytes: joined(parts) };
}

export function decodeTable(head: TableHead, bytes: Uint8Array): Row[] {
  let at = 0;
  const columns = head.columns.map((c): { name: string; cells: Cell[] } => {
    const size = c.wide === true ? 8 : 4;
    const values = fromPlanes(bytes.subarray(at, at + size * head.rows), head.rows, size);
    at += size * head.rows;
    return { name: c.name, cells: values.map((v) => (Number.isNaN(v) ? null : (c.words?.[v] ?? v))) };
  });
  return Array.from({ length: head.rows }, (_, k) => Object.fromEntries(columns.map((c) => [c.name, c.cells[k]])));
}

function planes(values: readonly number[], size: 4 | 8): Uint8Array {
  const n = values.length;
  const view = new DataView(new ArrayBuffer(8));
  const out = new Uint8Array(size * n);
  values.forEach((v, k) => {
    if (size === 8) view.setFloat64(0, v, true);
    else view.setFloat32(0, v, true);
    for (let b = 0; b < size; b++) out[b * n + k] = view.getUint8(b);
  });
  return out;
}

function fromPlanes(bytes: Uint8Array, n: number, size: 4 | 8): number[] {
  const view = new DataView(new ArrayBuffer(8));
  return Array.from({ length: n }, (_, k) => {
    for (let b = 0; b < size; b++) view.setUint8(b, bytes[b * n + k]);
    return size === 8 ? view.getFloat64(0, true) : view.getFloat32(0, true);
  });
}

function joined(parts: readonly Uint8Array[]): Uint8Array {
  const out = new Uint8Array(parts.reduce((n, p) => n + p.length, 0));
  let at = 0;
  for (const p of parts) {
    out.set(p, at);
    at += p.length;
  }
  return out;
}

/** Whole numbers of any size, small ones in one byte (LEB128; signed ones folded so that −1 is 1, 1 is 2), and single-precision numbers. */
export class ByteWriter {
  private bytes = new Uint8Array(1024);
  private length = 0;

  whole(v: number): void {
    let rest = v;
    while (rest >= 128) {
      this.byte((rest % 128) | 128);
      rest = Math.floor(rest / 128);
    }
    this.byte(rest);
  }

  signed(v: number): void {
    this.whole(v < 0 ? -2 * v - 1 : 2 * v);
  }

  float(v: number): void {
    const view = new DataView(new ArrayBuffer(4));
    view.setFloat32(0, v, true);
    for (let b = 0; b < 4; b++) this.byte(view.getUint8(b));
  }

  /** Numbers rounded to steps, each as its distance from the one before.
   *  @param stride every how many-th of `values` from `from` on belongs to this column */
  steps(values: ArrayLike<number>, from: number, stride: number, step: number): void {
    let before = 0;
    for (let k = from; k < values.length; k += stride) {
      const now = Math.round(values[k] / step);
      this.signed(now - before);
      before = now;
    }
  }

  done(): Uint8Array {
    return this.bytes.slice(0, this.length);
  }

  private byte(v: number): void {
    if (this.length === this.bytes.length) {
      const more = new Uint8Array(2 * this.length);
      more.set(this.bytes);
      this.bytes = more;
    }
    this.bytes[this.length++] = v;
  }
}

export class ByteReader {
  private at = 0;
  private readonly view: DataView;

  constructor(private readonly bytes: Uint8Array) {
    this.view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  }

  whole(): number {
    let v = 0;
    for (let f = 1; ; f *= 128) {
      const b = this.bytes[this.at++];
      v += (b & 127) * f;
      if (b < 128) return v;
    }
  }

  signed(): number {
    const v = this.whole();
    return v % 2 === 1 ? -(v + 1) / 2 : v / 2;
  }

  float(): number {
    this.at += 4;
    return this.view.getFloat32(this.at - 4, true);
  }

  steps(out: Float32Array, from: number, stride: number, step: number): void {
    let now = 0;
    for (let k = from; k < out.length; k += stride) {
      now += this.signed();
      out[k] = now * step;
    }
  }
}
