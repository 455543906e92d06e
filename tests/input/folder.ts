import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { dirname, join } from "node:path";
import { createTiff } from "../../src/demo/write_tiff.js";
import { closeImages } from "../../src/input/index.js";
import { InputError } from "../../src/model/errors.js";

/** A folder of its own for one cooldown, with its files; `remove` it when done. */
export class CooldownFolder {
  readonly path = mkdtempSync(join(tmpdir(), "coldseam-input-"));

  text(name: string, content: string): string {
    const file = join(this.path, name);
    mkdirSync(dirname(file), { recursive: true });
    writeFileSync(file, content);
    return file;
  }

  /** A stack of float32 pages; `value(page, row, column)` gives the pixels. */
  stack(name: string, pages: number, rows = 6, cols = 5, value = gradient): void {
    const file = this.text(name, "");
    const writer = createTiff(file);
    for (let p = 0; p < pages; p++) {
      writer.addPage(
        Float32Array.from({ length: rows * cols }, (_, k) => value(p, Math.floor(k / cols), k % cols)),
        rows,
        cols,
      );
    }
    writer.close();
  }

  async remove(): Promise<void> {
    await closeImages();
    rmSync(this.path, { recursive: true, force: true });
  }
}

const gradient = (page: number, row: number, col: number): number => 1 + page + 0.1 * row + 0.01 * col;

/** The lines `at: problem | fix` of the InputError that `f` must end in. */
export async function problemsOf(f: Promise<unknown>): Promise<string[]> {
  const e = await f.then(
    () => null,
    (error: unknown) => error,
  );
  if (!(e instanceof InputError)) throw new Error(`expected an InputError, got ${String(e)}`, { cause: e });
  return e.problems.map((p) => `${p.at}: ${p.problem} | ${p.fix}`);
}
