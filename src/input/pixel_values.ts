/** How one number lies in a file: `f` IEEE float, `i` signed, `u` unsigned, `b` boolean. */
export interface PixelType {
  readonly kind: "f" | "i" | "u" | "b";
  readonly bytes: number;
  readonly littleEndian: boolean;
}

/** `float32`, `uint16`, `bool`. */
export function typeName(t: PixelType): string {
  if (t.kind === "b") return "bool";
  return `${t.kind === "f" ? "float" : t.kind === "i" ? "int" : "uint"}${t.bytes * 8}`;
}

/** A walk through values that do not lie side by side: `count` of them, from `start` in steps of `step`. */
export interface Walk {
  readonly start: number;
  readonly step: number;
}

/**
 * Copies `count` values of `source`, times `scale` in double precision, to `out`, which rounds them to float32 once. Integers up
 * to 2^24 and all float32 values, NaN included, come through unchanged where `scale` is 1.
 * @param source memory that starts at the first value (any alignment)
 * @param from   indices in `source`, counted in values
 * @param to     indices in `out`
 */
export function copyPixels(
  source: Uint8Array,
  type: PixelType,
  from: Walk,
  scale: number,
  out: Float32Array,
  to: Walk,
  count: number,
): void {
  const native = from.step === 1 && to.step === 1 ? floatView(source, type) : null;
  if (native !== null) {
    const part = native.subarray(from.start, from.start + count);
    if (scale === 1) out.set(part, to.start);
    else for (let k = 0, o = to.start; k < count; k++, o++) out[o] = part[k] * scale;
    return;
  }
  const view = new DataView(source.buffer, source.byteOffset, source.byteLength);
  const value = valueReader(view, type);
  for (let k = 0, i = from.start, o = to.start; k < count; k++, i += from.step, o += to.step) out[o] = value(i) * scale;
}

/** The bytes as floats where this machine (little-endian on every platform of Node we know) can read them as they are. */
function floatView(source: Uint8Array, type: PixelType): Float32Array | Float64Array | null {
  if (type.kind !== "f" || !type.littleEndian || type.bytes === 2 || source.byteOffset % type.bytes !== 0) return null;
  const n = Math.floor(source.byteLength / type.bytes);
  return type.bytes === 4
    ? new Float32Array(source.buffer, source.byteOffset, n)
    : new Float64Array(source.buffer, source.byteOffset, n);
}

function valueReader(view: DataView, t: PixelType): (index: number) => number {
  const le = t.littleEndian;
  if (t.kind === "f") {
    if (t.bytes === 4) return (i) => view.getFloat32(4 * i, le);
    if (t.bytes === 8) return (i) => view.getFloat64(8 * i, le);
    return (i) => halfFloat(view.getUint16(2 * i, le));
  }
  if (t.kind === "i") {
    if (t.bytes === 1) return (i) => view.getInt8(i);
    if (t.bytes === 2) return (i) => view.getInt16(2 * i, le);
    if (t.bytes === 4) return (i) => view.getInt32(4 * i, le);
    return (i) => Number(view.getBigInt64(8 * i, le));
  }
  if (t.bytes === 1) return (i) => view.getUint8(i);
  if (t.bytes === 2) return (i) => view.getUint16(2 * i, le);
  if (t.bytes === 4) return (i) => view.getUint32(4 * i, le);
  return (i) => Number(view.getBigUint64(8 * i, le));
}

/** IEEE 754 binary16: sign, 5 bits of exponent, 10 of fraction. */
export function halfFloat(bits: number): number {
  const sign = bits & 0x8000 ? -1 : 1;
  const exponent = (bits >> 10) & 0x1f;
  const fraction = bits & 0x3ff;
  if (exponent === 0x1f) return fraction === 0 ? sign * Infinity : NaN;
  return exponent === 0 ? sign * fraction * 2 ** -24 : sign * (1 + fraction / 1024) * 2 ** (exponent - 15);
}
