import { spawnSync } from "node:child_process";
import {
  existsSync,
  lstatSync,
  mkdirSync,
  mkdtempSync,
  readFileSync,
  readdirSync,
  rmSync,
  symlinkSync,
  truncateSync,
  utimesSync,
  writeFileSync,
} from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { fileURLToPath } from "node:url";
import { afterEach, beforeEach, describe, expect, test } from "vitest";
import { readEntry, writeEntry } from "../../src/workers/cache_entry.js";
import { cacheSize, clearCache, openCache, trimCache } from "../../src/workers/cache_folder.js";
import { cached, forgetTroubles, keyOf, takeTrouble } from "../../src/workers/cached.js";
import { contentKey } from "../../src/workers/content_key.js";
import { inNamespace, MAY_MOUNT } from "../cli/namespace.js";

let top: string;
let folder: string;
beforeEach(() => {
  top = mkdtempSync(path.join(tmpdir(), "coldseam-cache-test-"));
  folder = path.join(top, "lab.sqlite.cache");
  forgetTroubles();
});
afterEach(() => rmSync(top, { recursive: true, force: true }));

const SMALL = { rasters: 1e6, small: 1e5 };
const open = () => openCache(folder, 1e9, SMALL);
const name = (k: number): string => `map-${contentKey(k)}`;
const content = (k: number, bytes = 1000): Buffer => Buffer.alloc(bytes, k);

describe("content keys", () => {
  test("are the same for equal values, whatever the order of keys", () => {
    const a = { x: 1, y: [1.5, "two", null, undefined, true], z: Float32Array.of(1, Number.NaN) };
    expect(contentKey({ z: a.z.slice(), y: [...a.y], x: 1 })).toBe(contentKey(a));
    expect(contentKey(Buffer.from([1, 2]))).toBe(contentKey(Uint8Array.of(1, 2)));
  });

  test("tell apart what differs", () => {
    const values = [
      0, -0, 1, Number.NaN, Infinity, "1", "", true, false, null, undefined, [], {}, [1], [[1]], ["ab", "c"],
      ["a", "bc"], { a: 1 }, { a: undefined }, { b: 1 }, Float32Array.of(1), Float64Array.of(1), Uint8Array.of(),
      [1, 2], [12], 1e-320, { a: { b: 1 } }, { a: 1, b: 1 },
    ]; // prettier-ignore
    expect(new Set(values.map(contentKey)).size).toBe(values.length);
  });

  test("are refused where a value is not plain", () => {
    for (const v of [() => 1, new Map(), new Date(0), 1n, Symbol("s")]) expect(() => contentKey(v)).toThrow(TypeError);
  });
});

describe("an entry", () => {
  beforeEach(() => void open());

  test("comes back as it was kept, empty ones and views of larger memory too", () => {
    writeEntry(folder, name(1), content(1));
    writeEntry(folder, name(2), new Uint8Array(0));
    writeEntry(folder, name(3), content(7).subarray(3, 20));
    expect(readEntry(folder, name(1))).toEqual(content(1));
    expect(readEntry(folder, name(2))).toEqual(Buffer.alloc(0));
    expect(readEntry(folder, name(3))).toEqual(content(7, 17));
    expect(readEntry(folder, name(4))).toBeNull();
  });

  test("that was cut off, changed in one bit, or is something else counts as missing, and is written anew", () => {
    const file = path.join(folder, name(1));
    const spoil = [
      () => truncateSync(file, 500),
      () => truncateSync(file, 10),
      () => truncateSync(file, 0),
      () => {
        const bytes = readFileSync(file);
        bytes[bytes.length - 100] ^= 4;
        writeFileSync(file, bytes);
      },
      () => writeFileSync(file, "something else, and long enough to be an entry of this cache, at least"),
    ];
    for (const s of spoil) {
      writeEntry(folder, name(1), content(1));
      expect(readEntry(folder, name(1))).not.toBeNull();
      s();
      expect(readEntry(folder, name(1))).toBeNull();
    }
    writeEntry(folder, name(1), content(1));
    expect(readEntry(folder, name(1))).toEqual(content(1));
    expect(readdirSync(folder).filter((f) => f.startsWith("part-"))).toEqual([]);
  });

  test("is never a link, a pipe or a folder: none is followed, waited for, or replaced", () => {
    writeEntry(folder, name(1), content(1));
    const outside = path.join(top, "outside");
    writeFileSync(outside, readFileSync(path.join(folder, name(1))));
    symlinkSync(outside, path.join(folder, name(2)));
    mkdirSync(path.join(folder, name(3)));
    if (spawnSync("mkfifo", [path.join(folder, name(4))]).status !== 0) writeFileSync(path.join(folder, name(4)), "");
    const kinds = () => [2, 3, 4].map((k) => lstatSync(path.join(folder, name(k))).mode);
    const before = kinds();
    for (const k of [2, 3, 4]) {
      expect(readEntry(folder, name(k))).toBeNull();
      if (k !== 4 || !lstatSync(path.join(folder, name(4))).isFile()) writeEntry(folder, name(k), content(9));
    }
    expect(kinds()).toEqual(before);
    expect(readFileSync(outside)).toEqual(readFileSync(path.join(folder, name(1))));
  });
});

describe("the folder", () => {
  const used = (k: number, day: number): void => {
    writeEntry(folder, name(k), content(k));
    const time = new Date(Date.UTC(2026, 0, day));
    utimesSync(path.join(folder, name(k)), time, time);
  };

  test("what was used longest ago goes first", () => {
    open();
    [3, 1, 2, 4].forEach((day, k) => used(k, day));
    expect(readEntry(folder, name(1))).not.toBeNull(); // the oldest, but now it was used
    const { bytes } = cacheSize(folder);
    trimCache(folder, bytes / 2);
    expect([0, 1, 2, 3].map((k) => existsSync(path.join(folder, name(k))))).toEqual([false, true, false, true]);
    trimCache(folder, 0);
    expect(cacheSize(folder)).toEqual({ entries: 0, bytes: 0, trouble: null });
  });

  test("what we did not write stays, whatever its name, and so does the folder about it", () => {
    open();
    used(1, 1);
    const outside = path.join(top, "precious");
    mkdirSync(outside);
    writeFileSync(path.join(outside, name(9)), readFileSync(path.join(folder, name(1))));
    writeFileSync(path.join(folder, "notes.txt"), "mine");
    writeFileSync(path.join(folder, `${name(5)}.bak`), "named nearly like an entry");
    symlinkSync(path.join(outside, name(9)), path.join(folder, name(6)));
    symlinkSync(outside, path.join(folder, name(7)));
    mkdirSync(path.join(folder, name(8)));
    trimCache(folder, 0);
    expect(clearCache(folder)).toMatchObject({ entries: 0, left: { entries: 0 }, trouble: null, others: 5 });
    expect(readdirSync(folder).sort()).toEqual(
      ["CACHEDIR.TAG", "notes.txt", `${name(5)}.bak`, ...[6, 7, 8].map(name)].sort(),
    );
    expect(existsSync(path.join(outside, name(9)))).toBe(true);
  });

  const spoil = (): void => {
    writeFileSync(path.join(folder, name(1)), "");
    writeFileSync(path.join(folder, name(2)), Buffer.alloc(500));
    writeFileSync(path.join(folder, "part-99-0123456789abcdef"), Buffer.alloc(20));
    utimesSync(path.join(folder, "part-99-0123456789abcdef"), new Date(0), new Date(0));
  };

  test.each(["whole", "empty"])("entries that a power cut has spoilt are counted and removed; the tag is %s", (tag) => {
    open();
    used(0, 1);
    spoil();
    if (tag === "empty") truncateSync(path.join(folder, "CACHEDIR.TAG"), 0);
    const { entries, bytes } = cacheSize(folder);
    expect(entries).toBe(4);
    expect(clearCache(folder)).toMatchObject({ entries, bytes, left: { entries: 0 }, trouble: null, others: 0 });
    expect(existsSync(folder)).toBe(false);
    open();
    spoil();
    trimCache(folder, 0);
    expect(readdirSync(folder)).not.toContain(name(2));
  });

  test("in a folder without our tag only what begins as ours, or holds nothing, is counted and removed", () => {
    mkdirSync(folder);
    used(0, 1);
    spoil();
    expect(cacheSize(folder)).toMatchObject({ entries: 2 });
    trimCache(folder, 1e9);
    expect(clearCache(folder)).toMatchObject({ entries: 2, left: { entries: 0 }, trouble: null, others: 2 });
    expect(readdirSync(folder).sort()).toEqual([name(2), "part-99-0123456789abcdef"]);
  });

  test("is removed when it is cleared, with halves that a killed run has left", () => {
    open();
    used(1, 1);
    writeFileSync(path.join(folder, "part-99-0123456789abcdef"), "coldseam ca");
    expect(clearCache(folder).entries).toBe(2);
    expect(existsSync(folder)).toBe(false);
    const none = { entries: 0, bytes: 0 };
    expect(clearCache(folder)).toEqual({ ...none, left: none, trouble: null, others: 0 });
  });

  test("halves are removed a day later; until then another run may be at them", () => {
    open();
    const half = path.join(folder, "part-99-0123456789abcdef");
    writeFileSync(half, "coldseam cache 1\nhal");
    trimCache(folder, 1e9);
    expect(existsSync(half)).toBe(true);
    trimCache(folder, 1e9, Date.now() + 25 * 3600 * 1000);
    expect(existsSync(half)).toBe(false);
  });

  test("a link or a file in its place is left alone, and no cache is used", () => {
    const elsewhere = path.join(top, "elsewhere");
    mkdirSync(elsewhere);
    writeFileSync(path.join(elsewhere, name(1)), "coldseam cache 1\n");
    symlinkSync(elsewhere, folder);
    expect(open()).toMatchObject({
      use: null,
      trouble: expect.stringMatching(/is no folder; it is left alone/) as string,
    });
    trimCache(folder, 0);
    expect(clearCache(folder).entries).toBe(0);
    expect(readdirSync(elsewhere)).toEqual([name(1)]);
    rmSync(folder);
    writeFileSync(folder, "mine");
    expect(open().use).toBeNull();
    expect(readFileSync(folder, "utf8")).toBe("mine");
  });

  test("a limit too small for the rasters keeps all else; one too small for that keeps nothing", () => {
    expect(open()).toMatchObject({ use: { write: true, rasters: true }, trouble: null });
    expect(openCache(folder, 5e5, SMALL)).toMatchObject({ use: { write: true, rasters: false }, trouble: null });
    expect(openCache(folder, 5e4, SMALL)).toMatchObject({
      use: { write: false },
      trouble:
        "nothing is added, as the limit is too small: this cooldown needs about 1 MB, 2 MB with its full-size rasters, and --cache-mb allows 0.05",
    });
    expect(openCache(folder, Infinity, { rasters: 1e18, small: 0 }).trouble).toMatch(/space left on its disk/);
    expect(openCache(path.join(top, "no such folder", "c"), 1e9, SMALL)).toMatchObject({ use: null });
    // Where nothing may be added, what is there is used, and nothing is made.
    const other = path.join(top, "other");
    expect(openCache(other, 0, SMALL).use).toBeNull();
    expect(existsSync(other)).toBe(false);
  });
});

describe("a stage's result", () => {
  test("is made once; another input, stage or program makes another", async () => {
    const { use } = open();
    let made = 0;
    const get = (stage: string, from: unknown, code = "this") =>
      cached(use === null ? null : { ...use, code }, stage, from, () => ({
        made: made++,
        bins: Float32Array.of(1, -0),
      }));
    const first = await get("map", { a: 1 });
    expect(await get("map", { a: 1 })).toEqual(first);
    expect(made).toBe(1);
    await get("walls", { a: 1 });
    await get("map", { a: 2 });
    await get("map", { a: 1 }, "another program");
    expect(made).toBe(4);
    await cached(null, "map", { a: 1 }, () => ({ made: made++ }));
    expect(made).toBe(5);
  });

  test("that cannot be kept is used all the same; why is said once", async () => {
    const { use } = open();
    rmSync(folder, { recursive: true });
    for (const k of [1, 2]) expect(await cached(use, "map", k, () => ({ k }))).toEqual({ k });
    expect(takeTrouble({ cache: use })).toBe(
      `nothing more of this run is kept in ${folder}: it is gone (ENOENT); leave the folder where it is while an ingest runs, or use --no-cache`,
    );
    expect(takeTrouble({ cache: use })).toBeNull();
    expect(existsSync(folder)).toBe(false);
  });

  test.runIf(MAY_MOUNT)("that finds the disk full is used all the same; no half of it stays", () => {
    const script = fileURLToPath(new URL("full_disk_run.mjs", import.meta.url));
    const r = inNamespace(`mount -t tmpfs -o size=64k tmpfs '${top}'; '${process.execPath}' '${script}' '${top}'`);
    expect(JSON.parse(r.out), r.err).toEqual({
      right: true,
      trouble: expect.stringMatching(/no space is left on its disk \(ENOSPC\); free some space there, or/) as string,
      names: ["map", "map"],
      second: ["first", "first", "second", "second"],
    });
  });

  test("of which the content is sound, but no value, is made anew", async () => {
    const { use } = open();
    writeEntry(folder, `map-${keyOf(use, "map", 1)}`, Buffer.from("no kept value"));
    expect(await cached(use, "map", 1, () => ({ k: 1 }))).toEqual({ k: 1 });
    expect(await cached(use, "map", 1, () => ({ k: 2 }))).toEqual({ k: 1 });
  });
});
