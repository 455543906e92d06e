import { plainText } from "../model/text.js";
import { ImageFileError } from "./byte_file.js";
import { callHdf5, forgetRefused, hdf5Library, lieElsewhere, type Hdf5Library } from "./hdf5_library.js";
import type { Dataset, Entity, File, Metadata } from "./hdf5_types.js";
import { checkSize, choosePlane, MAX_PAGES, type OpenImage, type PageShape } from "./image_types.js";
import { defaultSignal, nexusClaims } from "./nexus.js";
import { copyPixels, typeName, type PixelType } from "./pixel_values.js";

const MAX_CHUNK_BYTES = 128 * 1024 * 1024;
const PIECE_BYTES = 64 * 1024 * 1024;

/** How the values of a dataset lie in memory once the library has read them: always in this machine's byte order. */
interface Values {
  readonly type: PixelType;
  readonly planes: 1 | 2;
}

/**
 * Opens one dataset of an HDF5 file: shape [rows, columns] or [pages, rows, columns], integers of 1 to 8 bytes, booleans, floats of 2 to
 * 8 bytes, complex numbers as a compound of two floats; contiguous or chunked, deflate, shuffle, checksums and what else the library
 * unpacks. A NeXus `NXdata` group stands for its signal; its axes are claims. One page is read at a time. Throws ImageFileError.
 * @param dataset path from the root of the file; null throws with the names of what it holds
 */
export async function openHdf5(path: string, dataset: string | null): Promise<OpenImage> {
  const library = await hdf5Library();
  const file = callHdf5(path, () => library.open(path));
  try {
    const { set, values, pages, rows, cols, claims } = callHdf5(path, () => {
      const found = findDataset(file, dataset);
      const claims = nexusClaims(file, found);
      forgetRefused(); // an axis in another file claims nothing
      return { ...describe(found), claims };
    });
    const complex = values.planes === 2;
    const type = complex ? `complex${16 * values.type.bytes}` : typeName(values.type);
    const shape: PageShape = { rows, cols, type, planes: values.planes, complex };
    return {
      format: "hdf5",
      pages: Array.from({ length: pages }, () => shape),
      claims,
      read: (page, scale, plane) =>
        Promise.resolve().then(() => {
          if (!(page >= 0 && page < pages)) {
            throw new ImageFileError(`no such page; the dataset has ${pages}`, "give a page it has", page);
          }
          const chosen = choosePlane(shape, plane, page);
          return callHdf5(path, () => readPage(library, set, values, page, scale, chosen));
        }),
      close: () => Promise.resolve(void callHdf5(path, () => file.close())),
    };
  } catch (e) {
    callHdf5(path, () => file.close());
    throw e;
  }
}

/** The image datasets of a file, for drafting a description. Throws ImageFileError. */
export async function listHdf5(path: string): Promise<string[]> {
  const library = await hdf5Library();
  const file = callHdf5(path, () => library.open(path));
  try {
    return callHdf5(path, () => imagesIn(file).map((i) => i.path));
  } finally {
    callHdf5(path, () => file.close());
  }
}

function findDataset(file: File, written: string | null): Dataset {
  const entity = written === null ? null : file.get(written);
  if (isDataset(entity)) return entity;
  if (entity !== null && "filename" in entity && "obj_path" in entity) throw lieElsewhere(entity.filename);
  const signal = entity !== null && "keys" in entity ? defaultSignal(file, entity) : null;
  if (signal !== null) return signal;
  const images = imagesIn(file);
  const list = images.slice(0, 8).map((i) => plainText(`${i.path} (${i.shape.join(" × ")})`));
  const holds =
    images.length === 0
      ? "it holds no image"
      : `it holds ${list.join(", ")}${images.length > 8 ? ` and ${images.length - 8} more` : ""}`;
  const what =
    entity === null ? `no dataset "${plainText(written ?? "")}"` : `"${plainText(written ?? "")}" is no dataset`;
  throw new ImageFileError(
    `${written === null ? "an HDF5 file, and no dataset is named" : what}; ${holds}`,
    `name the dataset behind a colon: "FILE:${plainText(images[0]?.path ?? "/entry/data/amplitude")}"`,
  );
}

const isDataset = (e: Entity | null): e is Dataset => e !== null && "slice" in e && "metadata" in e;

/** Datasets of two or three dimensions and a type that is read, by a walk of bounded length that goes through no group twice. */
function imagesIn(file: File): { path: string; shape: readonly number[] }[] {
  const out: { path: string; shape: readonly number[] }[] = [];
  const queue = ["/"];
  for (let n = 0; n < queue.length && n < 500; n++) {
    const group = file.get(queue[n]);
    if (group === null || !("keys" in group) || queue[n].split("/").length > 12) continue;
    for (const key of group.keys().slice(0, 500)) {
      const path = `${queue[n] === "/" ? "" : queue[n]}/${key}`;
      if (group.get_type(path) === undefined) continue;
      const child = file.get(path);
      if (isDataset(child)) {
        const shape = child.metadata.shape ?? [];
        if ((shape.length === 2 || shape.length === 3) && valuesOf(child.metadata) !== null) out.push({ path, shape });
      } else if (child !== null && "keys" in child) queue.push(path);
    }
  }
  forgetRefused();
  return out;
}

function describe(set: Dataset): { set: Dataset; values: Values; pages: number; rows: number; cols: number } {
  const m = set.metadata;
  const shape = m.shape ?? [];
  const name = plainText(set.path);
  const values = valuesOf(m);
  if (values === null) {
    throw new ImageFileError(
      `${name} does not hold numbers of a type that is read; expected integers, floats or complex numbers`,
      "give the dataset that holds the image, or write it as 32-bit floats",
    );
  }
  if (shape.length !== 2 && shape.length !== 3) {
    throw new ImageFileError(
      `${name} has the shape (${shape.join(", ")}); expected (rows, columns) or (pages, rows, columns)`,
      "write the dataset in one of these shapes",
    );
  }
  const [pages = 0, rows = 0, cols = 0] = shape.length === 3 ? shape : [1, ...shape];
  checkSize(rows, cols, null);
  if (!(pages >= 1 && pages <= MAX_PAGES)) {
    throw new ImageFileError(`${pages} pages; expected 1 to ${MAX_PAGES}`, "split the stack");
  }
  const chunk = (m.chunks ?? []).reduce((a, b) => a * b, m.size);
  if (chunk > MAX_CHUNK_BYTES) {
    throw new ImageFileError(
      `${name} is stored in chunks of ${chunk} bytes; at most ${MAX_CHUNK_BYTES} are read`,
      "write it again with one page or less a chunk",
    );
  }
  return { set, values, pages, rows, cols };
}

const INTEGER = 0;
const FLOAT = 1;
const COMPOUND = 6;
const ENUM = 8;
const PAIR = /^(r,i|re,im|real,imag|real,imaginary)$/i;

/** null for what is not a number. The library hands values over little-endian, the order of the machine it stands for. */
function valuesOf(m: Metadata): Values | null {
  const { size } = m;
  const whole = size === 1 || size === 2 || size === 4 || size === 8;
  if (m.type === FLOAT && whole && size > 1) return { type: { kind: "f", bytes: size, littleEndian: true }, planes: 1 };
  if ((m.type === INTEGER || (m.type === ENUM && m.enum_type?.type === INTEGER)) && whole) {
    return { type: { kind: m.signed ? "i" : "u", bytes: size, littleEndian: true }, planes: 1 };
  }
  const [re, im] = m.compound_type?.members ?? [];
  if (m.type !== COMPOUND || m.compound_type?.members.length !== 2 || re === undefined || im === undefined) return null;
  const floats = re.type === FLOAT && im.type === FLOAT && re.size === im.size && (re.size === 4 || re.size === 8);
  const packed = re.offset === 0 && im.offset === re.size && size === 2 * re.size;
  if (!floats || !packed || !PAIR.test(`${re.name},${im.name}`)) return null;
  return { type: { kind: "f", bytes: re.size, littleEndian: true }, planes: 2 };
}

function readPage(
  { module }: Hdf5Library,
  set: Dataset,
  { type, planes }: Values,
  page: number,
  scale: number,
  plane: number,
): Float32Array {
  const shape = set.metadata.shape ?? [];
  const [rows = 0, cols = 0] = shape.slice(-2);
  const out = new Float32Array(rows * cols);
  const rowBytes = cols * planes * type.bytes;
  const rowsAPiece = Math.max(1, Math.min(rows, Math.floor(PIECE_BYTES / rowBytes)));
  const address = module._malloc(rowsAPiece * rowBytes);
  if (address === 0) throw new ImageFileError("no memory left for a page", "crop or bin the image", page);
  try {
    for (let row = 0; row < rows; row += rowsAPiece) {
      const here = Math.min(rowsAPiece, rows - row);
      const lead = shape.length === 3 ? [[page, 1]] : [];
      const range = [...lead, [row, here], [0, cols]].map(([start, count]) => [BigInt(start), BigInt(count)] as const);
      const count = range.map((r) => r[1]);
      const start = range.map((r) => r[0]);
      const steps = range.map(() => 1n);
      module.get_dataset_data(set.file_id, set.path, count, start, steps, BigInt(address));
      // The library's memory may have grown and moved: the view is taken afresh, and copied from at once.
      const bytes = module.HEAPU8.subarray(address, address + here * rowBytes);
      const from = { start: plane, step: planes };
      copyPixels(bytes, type, from, scale, out, { start: row * cols, step: 1 }, here * cols);
    }
  } finally {
    module._free(address);
  }
  return out;
}
