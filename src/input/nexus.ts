import type { PixelSize } from "../model/raster.js";
import type { Dataset, Entity, File, Group } from "./hdf5_types.js";
import { MAX_PAGES, type FileClaims } from "./image_types.js";

const NM_PER: Readonly<Record<string, number>> = {
  m: 1e9, meter: 1e9, metre: 1e9,
  mm: 1e6, millimeter: 1e6, millimetre: 1e6,
  "µm": 1e3, um: 1e3, micron: 1e3, micrometer: 1e3, micrometre: 1e3,
  nm: 1, nanometer: 1, nanometre: 1,
  pm: 1e-3, "å": 0.1, angstrom: 0.1,
}; // prettier-ignore
const MAX_AXIS = 20_000;
const MAX_TEXT_BYTES = 65536;
/** Positions read from a scanner jitter; beyond this the pixels have no one size. */
const EVEN = 0.01;

/** The signal of an `NXdata` group, or of the one that a group above it calls its default; null where there is none. */
export function defaultSignal(file: File, group: Group, depth = 0): Dataset | null {
  const signal = text(group, "signal");
  if (signal !== null) {
    const found = file.get(join(group.path, signal));
    if (found !== null && "slice" in found) return found;
  }
  const below = text(group, "default");
  const next = below === null || depth > 4 ? null : file.get(join(group.path, below));
  return next !== null && "keys" in next ? defaultSignal(file, next, depth + 1) : null;
}

/**
 * What the axes of the `NXdata` group around a dataset say: the temperatures of its pages, in K, and the pixel size, where an axis
 * has a unit of temperature or of length, as many values as the dataset has (or one more, for edges), and even steps. An axis
 * without a unit claims nothing.
 * Source: NeXus manual, rules for NXdata (`signal`, `axes`, `AXISNAME_indices`), and the older `axes` of the signal itself.
 */
export function nexusClaims(file: File, set: Dataset): FileClaims {
  const shape = set.metadata.shape ?? [];
  const group = file.get(set.path.replace(/\/[^/]*$/, "") || "/");
  if (group === null || !("keys" in group) || text(group, "NX_class") !== "NXdata") {
    return { pixel: null, temperaturesK: null };
  }
  const names = axisNames(group, set, shape.length);
  const axis = (dimension: number): Axis | null => {
    const name = names[dimension];
    return name === undefined ? null : readAxis(file.get(join(group.path, name)), shape[dimension]);
  };
  const y = axis(shape.length - 2);
  const x = axis(shape.length - 1);
  const [xNm, yNm] = [spacingNm(x), spacingNm(y)];
  const pixel: PixelSize | null = xNm === null || yNm === null ? null : { xNm, yNm };
  return { pixel, temperaturesK: shape.length === 3 ? kelvins(axis(0), shape[0]) : null };
}

interface Axis {
  readonly values: readonly number[];
  readonly unit: string;
}

function axisNames(group: Group, set: Dataset, rank: number): (string | undefined)[] {
  const listed =
    texts(group, "axes") ?? texts(set, "axes")?.flatMap((s) => s.replace(/[[\]]/g, "").split(/[:,]/)) ?? [];
  const out: (string | undefined)[] = Array.from({ length: rank });
  listed.forEach((written, k) => {
    const name = written.trim();
    if (name === "" || name === ".") return;
    const indices = numbers(group, `${name}_indices`);
    const dimension = indices === null ? k : indices.length === 1 ? indices[0] : -1;
    if (dimension >= 0 && dimension < rank) out[dimension] ??= name;
  });
  return out;
}

function readAxis(entity: Entity | null, length: number): Axis | null {
  if (entity === null || !("slice" in entity)) return null;
  const set = entity;
  const n = set.metadata.shape?.[0] ?? 0;
  const plain = set.metadata.shape?.length === 1 && (set.metadata.type === 0 || set.metadata.type === 1);
  if (!plain || n > MAX_AXIS || (n !== length && n !== length + 1)) return null;
  const values = numbersOf(set.value);
  const unit = text(set, "units");
  return unit === null || values === null ? null : { values, unit };
}

function spacingNm(axis: Axis | null): number | null {
  if (axis === null || axis.values.length < 2) return null;
  const unit = axis.unit.trim().normalize("NFKC").toLowerCase().replace("\u03bc", "µ");
  const nmPer = NM_PER[unit] ?? NM_PER[unit.replace(/s$/, "")];
  const v = axis.values;
  const step = (v[v.length - 1] - v[0]) / (v.length - 1);
  const even = v.every((x, k) => k === 0 || Math.abs(x - v[k - 1] - step) <= EVEN * Math.abs(step));
  if (nmPer === undefined || !even || !(Math.abs(step) > 0)) return null;
  // Twelve digits: what is left of the subtraction of two positions is no more.
  return Number((Math.abs(step) * nmPer).toPrecision(6));
}

function kelvins(axis: Axis | null, pages: number): readonly number[] | null {
  if (axis === null || axis.values.length !== pages || pages > MAX_PAGES) return null;
  const unit = axis.unit.trim();
  if (/^(k|kelvins?)$/i.test(unit)) return axis.values;
  if (/^(°\s?c|℃|c|deg_?c|celsius|degrees? ?celsius)$/i.test(unit))
    return axis.values.map((c) => Number((c + 273.15).toFixed(9)));
  return null;
}

function join(group: string, name: string): string {
  return name.startsWith("/") ? name : `${group === "/" ? "" : group}/${name}`;
}

type WithAttributes = Pick<Dataset, "attrs">;

function attribute(of: WithAttributes, name: string): unknown {
  const found = of.attrs[name];
  if (found === undefined) return undefined;
  const { size, total_size: count } = found.metadata;
  return size * count > MAX_TEXT_BYTES ? undefined : found.value;
}

function texts(of: WithAttributes, name: string): string[] | null {
  const value = attribute(of, name);
  if (typeof value === "string") return [value];
  return Array.isArray(value) && value.every((v) => typeof v === "string") ? value : null;
}

function text(of: WithAttributes, name: string): string | null {
  const all = texts(of, name);
  return all?.length === 1 ? (all[0] ?? null) : null;
}

const numbers = (of: WithAttributes, name: string): number[] | null => numbersOf(attribute(of, name));

function numbersOf(value: unknown): number[] | null {
  if (typeof value === "number" || typeof value === "bigint") return [Number(value)];
  if (value instanceof Float64Array || value instanceof Float32Array) return Array.from(value);
  if (value instanceof Int32Array || value instanceof Int16Array || value instanceof Int8Array)
    return Array.from(value);
  if (value instanceof Uint32Array || value instanceof Uint16Array || value instanceof Uint8Array)
    return Array.from(value);
  if (value instanceof BigInt64Array || value instanceof BigUint64Array) return Array.from(value, Number);
  return null;
}
