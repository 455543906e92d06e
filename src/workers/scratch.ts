import {
  existsSync,
  mkdtempSync,
  readFileSync,
  readdirSync,
  renameSync,
  rmSync,
  statSync,
  writeFileSync,
} from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { deserialize, serialize } from "node:v8";
import { threadId } from "node:worker_threads";
import { InputError } from "../model/errors.js";
import { colsOf, dataOf, makeRaster, rowsOf, type PixelSize, type Raster } from "../model/raster.js";
import type { CleanFrame } from "../model/signal.js";

/** Full-size rasters between the passes lie in a folder of their own on disk, so that memory does not grow with the number of
 *  frames and no source is read and cleaned twice. The folder is removed at the end of the run; one that a killed run has left is
 *  removed by a later run. */
export function makeScratch(): string {
  removeAbandoned(tmpdir());
  return spaceFor(tmpdir(), () => mkdtempSync(path.join(tmpdir(), `coldseam-${process.pid}-`)));
}

const ABANDONED_MS = 7 * 24 * 3600 * 1000;

/** Removes scratch folders of processes that are no more. Only old ones: where containers share a temporary folder, a process that cannot
 *  be seen from here may still be at work. */
export function removeAbandoned(folder: string, now = Date.now()): void {
  let names: string[];
  try {
    names = readdirSync(folder);
  } catch {
    return; // what is wrong with the folder is said when it is written to
  }
  for (const name of names) {
    const pid = /^coldseam-(\d+)-\w{6}$/.exec(name)?.[1];
    if (pid === undefined || isAlive(Number(pid))) continue;
    const dir = path.join(folder, name);
    try {
      if (now - statSync(dir).mtimeMs > ABANDONED_MS) removeScratch(dir);
    } catch {
      // somebody else's, or just removed by another run
    }
  }
}

function isAlive(pid: number): boolean {
  try {
    process.kill(pid, 0);
    return true;
  } catch (e) {
    return e instanceof Error && "code" in e && e.code === "EPERM";
  }
}

/** Runs `write`; a disk that is full or may not be written is no fault of the program's. */
function spaceFor<T>(dir: string, write: () => T): T {
  try {
    return write();
  } catch (e) {
    const code = e instanceof Error && "code" in e ? e.code : "";
    const full = code === "ENOSPC" || code === "EDQUOT";
    if (!full && code !== "EROFS" && code !== "EACCES" && code !== "ENOENT") throw e;
    throw new InputError(
      {
        at: dir,
        problem: full ? "no space left for the scratch files" : "scratch files cannot be written there",
        fix: "set TMPDIR to a folder with some space, on a local disk",
      },
      e,
    );
  }
}

export function removeScratch(dir: string): void {
  rmSync(dir, { recursive: true, force: true });
}

/** Folders of finished runs of which something is still to be read; gone at the latest when the process ends. */
const held = new Set<string>();
let watchingExit = false;

/** Removes all of a scratch folder but what `stays`, and that as well when the answer is called or the process ends. */
export function holdScratch(dir: string, stays: (name: string) => boolean): () => void {
  for (const name of readdirSync(dir)) if (!stays(name)) drop(dir, name);
  held.add(dir);
  if (!watchingExit) {
    watchingExit = true;
    process.once("exit", () => held.forEach(removeScratch));
  }
  return () => {
    held.delete(dir);
    removeScratch(dir);
  };
}

/** Keeps any structured-cloneable value under a name. */
export function keep(dir: string, name: string, value: unknown): void {
  keepBytes(dir, name, serialize(value));
}

/** Keeps bytes as they are, put in place whole: another thread may look for them at any moment. */
export function keepBytes(dir: string, name: string, bytes: Uint8Array): void {
  const part = path.join(dir, `${name}.part-${threadId}`);
  spaceFor(path.dirname(dir), () => {
    writeFileSync(part, bytes);
    renameSync(part, path.join(dir, name));
  });
}

/** The bytes of a kept value. */
export const fetchBytes = (dir: string, name: string): Uint8Array => readFileSync(path.join(dir, name));

export const isKept = (dir: string, name: string): boolean => existsSync(path.join(dir, name));

/** Reads a kept value back; the caller names its type, as it was the one to keep it. */
export function fetchKept<T>(dir: string, name: string): T {
  return deserialize(readFileSync(path.join(dir, name))) as T;
}

/** Removes a kept value. */
export function drop(dir: string, name: string): void {
  rmSync(path.join(dir, name), { force: true });
}

interface FlatRaster {
  readonly data: Float32Array;
  readonly rows: number;
  readonly cols: number;
}

interface FlatFrame {
  readonly frame: number;
  readonly pixel: PixelSize;
  readonly topography: FlatRaster | null;
  readonly amplitude: FlatRaster;
  readonly phase: FlatRaster | null;
  readonly rowGainErrorSd: Float32Array | null;
}

const flat = (r: Raster): FlatRaster => ({ data: dataOf(r), rows: rowsOf(r), cols: colsOf(r) });
const round = (f: FlatRaster, pixel: PixelSize): Raster => makeRaster(f.data, f.rows, f.cols, pixel);

export function keepClean(dir: string, clean: CleanFrame): void {
  const flatFrame: FlatFrame = {
    frame: clean.frame,
    pixel: clean.pixel,
    topography: clean.topography && flat(clean.topography),
    amplitude: flat(clean.amplitude),
    phase: clean.phase && flat(clean.phase),
    rowGainErrorSd: clean.rowGainErrorSd ?? null,
  };
  keep(dir, `clean-${clean.frame}`, flatFrame);
}

export function fetchClean(dir: string, frame: number): CleanFrame {
  const f = fetchKept<FlatFrame>(dir, `clean-${frame}`);
  return {
    frame: f.frame,
    pixel: f.pixel,
    topography: f.topography && round(f.topography, f.pixel),
    amplitude: round(f.amplitude, f.pixel),
    phase: f.phase && round(f.phase, f.pixel),
    rowGainErrorSd: f.rowGainErrorSd,
  };
}
