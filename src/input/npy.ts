import { plainText } from "../model/text.js";
import { ByteFile, ImageFileError } from "./byte_file.js";
import { checkSize, choosePlane, MAX_PAGES, NO_CLAIMS, type OpenImage, type PageShape } from "./image_types.js";
import { copyPixels, typeName, type PixelType } from "./pixel_values.js";

const DAMAGED = "write the file again, for example with numpy.save";

interface NpyHeader {
  readonly type: PixelType;
  /** 2 where each value is a complex number: the real part, then the imaginary one, each of `type`. */
  readonly planes: 1 | 2;
  readonly fortran: boolean;
  readonly pages: number;
  readonly rows: number;
  readonly cols: number;
  readonly dataStart: number;
}

/**
 * Opens a NumPy `.npy` file: versions 1 to 3, both byte orders, C and Fortran order, booleans, integers of 1 to 8 bytes, floats of
 * 2 to 8 bytes, complex numbers of 8 and 16 bytes; shape [rows, columns] or [pages, rows, columns]. Throws ImageFileError on anything else and where the length of
 * the file is not what its header says.
 * Source: the format as published with NumPy (numpy.lib.format).
 */
export function openNpy(path: string): OpenImage {
  const file = new ByteFile(path);
  try {
    const h = readHeader(file);
    const complex = h.planes === 2;
    const type = complex ? `complex${16 * h.type.bytes}` : typeName(h.type);
    const shape: PageShape = { rows: h.rows, cols: h.cols, type, planes: h.planes, complex };
    return {
      format: "npy",
      pages: Array.from({ length: h.pages }, () => shape),
      claims: NO_CLAIMS,
      read: (page, scale, plane) =>
        Promise.resolve().then(() => readPage(file, h, page, scale, choosePlane(shape, plane, page))),
      close: () => Promise.resolve(file.close()),
    };
  } catch (e) {
    file.close();
    throw e;
  }
}

function readHeader(file: ByteFile): NpyHeader {
  const lead = file.read(0, Math.min(12, file.bytes));
  if (lead.length < 12) throw new ImageFileError("the file is cut off inside its header", DAMAGED);
  const major = lead[6];
  if (major < 1 || major > 3) {
    throw new ImageFileError(`.npy version ${major}.${lead[7]}; versions 1 to 3 are read`, DAMAGED);
  }
  const start = major === 1 ? 10 : 12;
  const length = major === 1 ? lead.readUInt16LE(8) : lead.readUInt32LE(8);
  if (length > 65536) throw new ImageFileError(`a header of ${length} bytes`, DAMAGED);
  const text = file.read(start, length).toString(major === 3 ? "utf8" : "latin1");
  const descr = /'descr'\s*:\s*'([^']*)'/.exec(text)?.[1];
  const order = /'fortran_order'\s*:\s*(True|False)/.exec(text)?.[1];
  const shapeText = /'shape'\s*:\s*\(([\d\s,L]*)\)/.exec(text)?.[1];
  if (order === undefined || shapeText === undefined) throw new ImageFileError("its header is damaged", DAMAGED);
  // A complex number of 8 or 16 bytes is two floats of half as many.
  const complex = /^([<>|=])c(8|16)$/.exec(descr ?? "");
  const planes = complex === null ? 1 : 2;
  const real = complex === null ? descr : `${complex[1]}f${Number(complex[2]) / 2}`;
  const type = real === undefined ? null : pixelType(real);
  if (type === null) {
    throw new ImageFileError(
      `values of type ${descr === undefined ? "record" : `"${plainText(descr)}"`}; expected real or complex numbers`,
      "save it as float32 or float64, complex64 or complex128",
    );
  }
  const shape = shapeText
    .split(",")
    .map((s) => s.trim().replace(/L$/, ""))
    .filter((s) => s !== "")
    .map(Number);
  if (shape.length !== 2 && shape.length !== 3) {
    throw new ImageFileError(
      `an array of shape (${shape.join(", ")}); expected (rows, columns) or (pages, rows, columns)`,
      "save the array in one of these shapes",
    );
  }
  const [pages, rows, cols] = shape.length === 3 ? shape : [1, ...shape];
  checkSize(rows, cols, null);
  if (!(pages >= 1 && pages <= MAX_PAGES)) {
    throw new ImageFileError(`${pages} pages; expected 1 to ${MAX_PAGES}`, DAMAGED);
  }
  const dataStart = start + length;
  const expected = dataStart + pages * rows * cols * planes * type.bytes;
  if (file.bytes !== expected) {
    throw new ImageFileError(
      `${file.bytes < expected ? "the file is cut off" : "the file goes on behind its data"}: ${file.bytes} bytes; ` +
        `its header asks for ${expected}`,
      file.bytes < expected ? "copy the file again from where it was measured" : "save one array a file",
    );
  }
  return { type, planes, fortran: order === "True", pages, rows, cols, dataStart };
}

/** A NumPy type such as `<f4`; null for what is not a real number. "=" is the writer's own order: little-endian as good as always. */
function pixelType(descr: string): PixelType | null {
  const m = /^([<>|=])([fiub])([1248])$/.exec(descr);
  const kind = (["f", "i", "u", "b"] as const).find((k) => k === m?.[2]);
  const bytes = Number(m?.[3]);
  if (kind === undefined || (kind === "b" && bytes !== 1) || (kind === "f" && bytes === 1)) return null;
  return { kind, bytes, littleEndian: m?.[1] !== ">" };
}

function readPage(file: ByteFile, h: NpyHeader, page: number, scale: number, plane: number): Float32Array {
  const { rows, cols, pages, planes, type } = h;
  if (!(page >= 0 && page < pages)) {
    throw new ImageFileError(`no such page; the file has ${pages}`, "give a page it has", page);
  }
  const out = new Float32Array(rows * cols);
  if (!h.fortran) {
    const bytes = rows * cols * planes * type.bytes;
    const data = new Uint8Array(file.readAligned(h.dataStart + page * bytes, bytes));
    copyPixels(data, type, { start: plane, step: planes }, scale, out, { start: 0, step: 1 }, rows * cols);
    return out;
  }
  // Fortran order: the page runs fastest, then the row; a column of all pages is one piece of the file.
  const piece = pages * rows * planes * type.bytes;
  for (let j = 0; j < cols; j++) {
    const data = new Uint8Array(file.readAligned(h.dataStart + j * piece, piece));
    copyPixels(
      data,
      type,
      { start: page * planes + plane, step: pages * planes },
      scale,
      out,
      { start: j, step: cols },
      rows,
    );
  }
  return out;
}
