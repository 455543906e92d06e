import { createHash, type Hash } from "node:crypto";

/** SHA-256 of a plain value: the same for equal values, whatever the order of an object's keys and however the engine holds a number.
 *  Takes numbers (NaN, −0 and infinities apart from each other), strings, booleans, null, undefined, arrays, typed arrays and plain
 *  objects of these. Throws TypeError on anything else: what cannot be told apart must not be taken for the same. */
export function contentKey(value: unknown): string {
  const hash = createHash("sha256");
  add(hash, value);
  return hash.digest("hex");
}

const number = Buffer.alloc(9);

function add(hash: Hash, v: unknown): void {
  switch (typeof v) {
    case "number":
      number[0] = 0x6e;
      if (Number.isNaN(v)) number.fill(0xff, 1);
      else number.writeDoubleLE(v, 1);
      hash.update(number);
      return;
    case "string":
      hash.update(`s${Buffer.byteLength(v)}:`).update(v);
      return;
    case "boolean":
      hash.update(v ? "t" : "f");
      return;
    case "undefined":
      hash.update("u");
      return;
    case "object":
      if (v === null) hash.update("0");
      else addObject(hash, v);
      return;
    default:
      throw new TypeError(`no content key for a ${typeof v}`);
  }
}

function addObject(hash: Hash, v: object): void {
  if (Array.isArray(v)) {
    hash.update(`a${v.length}:`);
    for (const item of v) add(hash, item);
    return;
  }
  if (ArrayBuffer.isView(v)) {
    // A Buffer is the bytes that it holds.
    const name = v instanceof Uint8Array ? "Uint8Array" : v.constructor.name;
    hash.update(`b${name}${v.byteLength}:`).update(new Uint8Array(v.buffer, v.byteOffset, v.byteLength));
    return;
  }
  const prototype: unknown = Object.getPrototypeOf(v);
  if (prototype !== Object.prototype && prototype !== null)
    throw new TypeError(`no content key for a ${v.constructor.name}`);
  const entries = Object.entries(v).sort(([a], [b]) => (a < b ? -1 : 1));
  hash.update(`o${entries.length}:`);
  for (const [key, item] of entries) {
    add(hash, key);
    add(hash, item);
  }
}
