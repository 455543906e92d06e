import { closeSync, fstatSync, openSync, readSync } from "node:fs";

/** A file open for reading at any place. A short read is an error here, never zeros. */
export class ByteFile {
  readonly path: string;
  readonly bytes: number;
  readonly #fd: number;
  #open = true;

  /** Throws the system's error where the file cannot be opened. */
  constructor(path: string) {
    this.path = path;
    this.#fd = openSync(path, "r");
    this.bytes = fstatSync(this.#fd).size;
  }

  /** `length` bytes from `offset`. Throws ImageFileError where the file ends before. */
  read(offset: number, length: number): Buffer {
    this.#mustHold(offset, length);
    const out = Buffer.allocUnsafe(length);
    this.#fill(out, offset);
    return out;
  }

  /** As `read`, into memory of its own that starts at a multiple of 8 bytes and can be viewed as any type. */
  readAligned(offset: number, length: number): ArrayBuffer {
    this.#mustHold(offset, length);
    const out = new ArrayBuffer(length);
    this.#fill(new Uint8Array(out), offset);
    return out;
  }

  #mustHold(offset: number, length: number): void {
    if (!(offset >= 0 && length >= 0 && offset + length <= this.bytes)) {
      throw new ImageFileError(
        `the file is cut off: ${this.bytes} bytes, but its header points to bytes ${offset} to ${offset + length}`,
        "copy the file again from where it was measured",
      );
    }
  }

  #fill(out: Uint8Array, offset: number): void {
    let done = 0;
    while (done < out.length) {
      const n = readSync(this.#fd, out, done, out.length - done, offset + done);
      if (n === 0) throw new ImageFileError("the file became shorter while it was read", "wait until it is written");
      done += n;
    }
  }

  close(): void {
    if (this.#open) closeSync(this.#fd);
    this.#open = false;
  }
}

/** An image file that cannot be read, in words for the user; whoever knows the file's name makes an InputError of it. */
export class ImageFileError extends Error {
  readonly fix: string;
  /** Page it is about, or null for the whole file. */
  readonly page: number | null;
  constructor(problem: string, fix: string, page: number | null = null, cause?: unknown) {
    super(problem, cause === undefined ? undefined : { cause });
    this.name = "ImageFileError";
    this.fix = fix;
    this.page = page;
  }
}
