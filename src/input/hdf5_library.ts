import type { File, H5Module } from "./hdf5_types.js";
import { plainText } from "../model/text.js";
import { ImageFileError } from "./byte_file.js";

/** Memory that the HDF5 library may take: an ordinary page with its chunks needs far less; a chunk that swells without end stops here. */
const MAX_HEAP_BYTES = 384 * 1024 * 1024;

export interface Hdf5Library {
  readonly module: H5Module;
  readonly open: (path: string) => File;
}

let loading: Promise<Hdf5Library> | null = null;
/** The one file that may be opened while a call into the library runs, and those it asked for besides. */
let allowed = "";
let refused: string[] = [];
let quiet = false;

/** The HDF5 library (h5wasm), loaded once a thread when the first HDF5 file is met. */
export function hdf5Library(): Promise<Hdf5Library> {
  loading ??= load();
  return loading;
}

async function load(): Promise<Hdf5Library> {
  // The library says on the console when it may not grow; the error that follows says it better.
  const say = console.error.bind(console);
  console.error = (...words: unknown[]): void => {
    if (!quiet) say(...words);
  };
  const h5 = await import("h5wasm/node");
  const module = await h5.ready;
  // Without this a missing filter or file reads as zeros.
  module.activate_throwing_error_handler();
  guardFiles(module);
  guardMemory(module);
  return { module, open: (path) => new h5.File(path, "r") };
}

/**
 * A dataset can point to other files (external links, external storage, virtual sources), which a description from somebody else
 * must not make the program read, and whose digest nobody would keep: only the named file is opened.
 */
function guardFiles(module: H5Module): void {
  const fs: object = module.FS;
  const open: unknown = Reflect.get(fs, "open");
  const errno: unknown = Reflect.get(fs, "ErrnoError");
  if (typeof open !== "function" || typeof errno !== "function") throw new Error("the HDF5 library has changed");
  Reflect.set(fs, "open", (...args: unknown[]): unknown => {
    const path = String(args[0]);
    // The library writes its own error texts through a temporary file.
    if (path !== allowed && !/(^|\/)tmpfile_\w{6}$/.test(path)) {
      refused.push(path);
      throw Reflect.construct(errno, [NO_SUCH_FILE]);
    }
    return Reflect.apply(open, fs, args) as unknown;
  });
}
const NO_SUCH_FILE = 44;

function guardMemory(module: H5Module): void {
  // Reached by name: the types of Node hold no WebAssembly values.
  const assembly = Reflect.get(globalThis, "WebAssembly") as { readonly Memory: { readonly prototype: object } };
  const memory = assembly.Memory.prototype;
  const grow: unknown = Reflect.get(memory, "grow");
  if (typeof grow !== "function") throw new Error("this Node.js cannot limit the HDF5 library's memory");
  Reflect.set(memory, "grow", function (this: object, pages: number): unknown {
    const ours = Reflect.get(this, "buffer") === module.HEAPU8.buffer;
    if (ours && module.HEAPU8.byteLength + pages * 65536 > MAX_HEAP_BYTES) throw new RangeError("no more memory");
    return Reflect.apply(grow, this, [pages]) as unknown;
  });
}

/**
 * Runs a call into the library that may open `path` and nothing else. Throws ImageFileError where it fails in any way, or asked for
 * another file.
 */
export function callHdf5<T>(path: string, f: () => T): T {
  allowed = path;
  refused = [];
  quiet = true;
  try {
    const result = f();
    throwRefused();
    return result;
  } catch (e) {
    if (e instanceof ImageFileError) throw e;
    throwRefused();
    throw damaged(e);
  } finally {
    allowed = "";
    quiet = false;
  }
}

function throwRefused(): void {
  const other = refused[0];
  if (other !== undefined) throw lieElsewhere(other);
}

/** For a walk through a file that meets links to others without wanting what they hold. */
export function forgetRefused(): void {
  refused = [];
}

export function lieElsewhere(other: string): ImageFileError {
  return new ImageFileError(
    `its data lie in another file, "${plainText(other)}", which is not followed`,
    "name that file itself, or write the data into this one",
  );
}

/** The innermost cause out of the library's long message. */
function damaged(e: unknown): ImageFileError {
  const text = e instanceof Error ? e.message : String(e);
  const causes = [...text.matchAll(/in \w+\(\): (.+)/g)];
  const cause = (causes.at(-1)?.[1] ?? text.split("\n", 1)[0] ?? "").slice(0, 200);
  const filter = /filter/i.test(text);
  return new ImageFileError(
    `HDF5: ${cause}`,
    filter
      ? "write the dataset again without this filter or with gzip, or copy the file again"
      : "check the path inside the file; if it is right the file is damaged: copy it again from where it was measured",
    null,
    e,
  );
}
