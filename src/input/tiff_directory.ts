import { ByteFile, ImageFileError } from "./byte_file.js";

export const COPY_AGAIN = "the file is damaged: copy it again from where it was measured";
/** Bytes a value of each type that holds whole numbers. */
const TYPE_BYTES: Readonly<Record<number, number>> = { 1: 1, 3: 2, 4: 4, 16: 8 };
const ASCII = 2;

/** One entry of a page's directory. */
export interface Field {
  readonly type: number;
  readonly count: number;
  /** The value itself where it fits, else where it lies. */
  readonly inline: Buffer;
}

/** Reads the directories of a TIFF or BigTIFF, of which only `wanted` tags are kept. */
export class DirectoryReader {
  readonly #file: ByteFile;
  readonly littleEndian: boolean;
  readonly #big: boolean;
  readonly #wanted: ReadonlySet<number>;
  constructor(file: ByteFile, littleEndian: boolean, big: boolean, wanted: ReadonlySet<number>) {
    this.#file = file;
    this.littleEndian = littleEndian;
    this.#big = big;
    this.#wanted = wanted;
  }

  get fileBytes(): number {
    return this.#file.bytes;
  }
  word2 = (b: Buffer, at: number): number => (this.littleEndian ? b.readUInt16LE(at) : b.readUInt16BE(at));
  word4 = (b: Buffer, at: number): number => (this.littleEndian ? b.readUInt32LE(at) : b.readUInt32BE(at));
  word8 = (b: Buffer, at: number): number => Number(this.littleEndian ? b.readBigUInt64LE(at) : b.readBigUInt64BE(at));

  directory(offset: number, page: number): { tags: Map<number, Field>; following: number } {
    const [countBytes, entryBytes, linkBytes] = this.#big ? [8, 20, 8] : [2, 12, 4];
    const lead = this.#read(offset, countBytes, page);
    const count = this.#big ? this.word8(lead, 0) : this.word2(lead, 0);
    if (count > 4096) throw new ImageFileError(`a page directory of ${count} entries`, COPY_AGAIN, page);
    const body = this.#read(offset + countBytes, count * entryBytes + linkBytes, page);
    const tags = new Map<number, Field>();
    for (let i = 0; i < count; i++) {
      const at = i * entryBytes;
      const tag = this.word2(body, at);
      if (!this.#wanted.has(tag)) continue;
      const inlineAt = at + (this.#big ? 12 : 8);
      tags.set(tag, {
        type: this.word2(body, at + 2),
        count: this.#big ? this.word8(body, at + 4) : this.word4(body, at + 4),
        inline: body.subarray(inlineAt, inlineAt + linkBytes),
      });
    }
    const following = this.#big ? this.word8(body, count * entryBytes) : this.word4(body, count * entryBytes);
    return { tags, following };
  }

  /** Whole numbers of a field, at most `most` of them. */
  values(field: Field, most: number, page: number): number[] {
    const size = TYPE_BYTES[field.type];
    if (size === undefined || field.count > most) {
      throw new ImageFileError(
        `a page directory entry of ${field.count} values of type ${field.type}`,
        COPY_AGAIN,
        page,
      );
    }
    const data = this.#bytes(field, size * field.count, page);
    const one = size === 1 ? (at: number) => data[at] : size === 2 ? (at: number) => this.word2(data, at) : null;
    const read = one ?? (size === 4 ? (at: number) => this.word4(data, at) : (at: number) => this.word8(data, at));
    return Array.from({ length: field.count }, (_, i) => read(i * size));
  }

  /** A text of at most `most` bytes; "" where the field holds none, or a longer one. */
  text(field: Field | undefined, most: number, page: number): string {
    if (field === undefined || field.type !== ASCII || field.count > most) return "";
    return this.#bytes(field, field.count, page).subarray(0, field.count).toString("utf8").replace(/\0+$/, "");
  }

  #bytes(field: Field, length: number, page: number): Buffer {
    if (length <= (this.#big ? 8 : 4)) return field.inline;
    return this.#read(this.#big ? this.word8(field.inline, 0) : this.word4(field.inline, 0), length, page);
  }

  #read(offset: number, length: number, page: number): Buffer {
    try {
      return this.#file.read(offset, length);
    } catch (e) {
      if (e instanceof ImageFileError) throw new ImageFileError(e.message, e.fix, page, e);
      throw e;
    }
  }
}
