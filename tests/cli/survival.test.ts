import { spawn } from "node:child_process";
import { createHash } from "node:crypto";
import {
  appendFileSync,
  copyFileSync,
  existsSync,
  mkdirSync,
  mkdtempSync,
  readFileSync,
  readdirSync,
  rmSync,
  writeFileSync,
} from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { generateStack } from "../../src/demo/index.js";
import { killIngests, runAndKill, spreadMoments, stateOf, tinyCooldown } from "../../src/study/survival.js";
import { openForReading, type Db } from "../../src/store/open.js";
import { writeEntry } from "../../src/workers/cache_entry.js";
import { openCache } from "../../src/workers/cache_folder.js";
import { inNamespace, MAY_MOUNT } from "./namespace.js";
import { coldseam, TOP, type Ended } from "./program.js";

const ENTRY = path.join(TOP, "scripts/coldseam.mjs");
const run = (...args: string[]): string[] => [process.execPath, ENTRY, ...args];
const sha = (f: string): string => createHash("sha256").update(readFileSync(f)).digest("hex");

let dir: string;
/** Two cooldowns, each in a database of its own, and both in one. */
let yamlA: string;
let yamlB: string;
let both: string;
/** One of the two alone. */
let one: string;
const at = (name: string): string => path.join(dir, name);

/** Runs the program, calling `onLine` with each line of its standard error. */
function watched(onLine: (line: string) => void, env: Record<string, string>, ...args: string[]): Promise<Ended> {
  return new Promise((resolve) => {
    const child = spawn(process.execPath, [ENTRY, ...args], { cwd: TOP, env: { ...process.env, ...env } });
    let out = "";
    let err = "";
    child.stdout.on("data", (d: Buffer) => (out += d.toString()));
    child.stderr.on("data", (d: Buffer) => {
      const before = err.length - (err.lastIndexOf("\n") + 1);
      const text = err.slice(err.length - before) + d.toString();
      err += d.toString();
      for (const line of text.split("\n").slice(0, -1)) onLine(line);
    });
    child.on("close", (code) => resolve({ code, out, err }));
  });
}

const rowsOf = (db: Db, analysis: number): number[] =>
  ["frame", "wall", "profile", "domain", "loop", "source"].map((t) =>
    Number(db.prepare(`SELECT count(*) FROM ${t} WHERE analysis_id = ?`).pluck().get(analysis)),
  );

beforeAll(async () => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-survival-test-"));
  yamlA = generateStack(tinyCooldown("kv30-a", 1), at("a"));
  yamlB = generateStack(tinyCooldown("kv30-b", 2), at("b"));
  both = at("both.sqlite");
  one = at("one.sqlite");
});
afterAll(() => rmSync(dir, { recursive: true, force: true }));

test("two ingests into one new file at once both land whole; readers in between see whole analyses", async () => {
  let ended = false;
  const seen = new Map<number, Set<string>>();
  let looks = 0;
  const ingests = Promise.all(
    [yamlA, yamlB].map((y) => watched(() => undefined, {}, "ingest", y, "--db", both, "--workers", "1")),
  ).finally(() => (ended = true));
  while (!ended) {
    await new Promise((r) => setTimeout(r, 15));
    if (!existsSync(both)) continue;
    let db: Db;
    try {
      db = openForReading(both);
    } catch (e) {
      // Nothing is in it before its first table is.
      expect(String(e)).toMatch(/no ingest into it was ever finished/);
      continue;
    }
    looks++;
    db.transaction(() => {
      for (const id of db.prepare<[], number>("SELECT id FROM analysis").pluck().all()) {
        seen.set(id, (seen.get(id) ?? new Set()).add(rowsOf(db, id).join(" ")));
      }
    })();
    db.close();
  }
  for (const r of await ingests) expect(r, r.err).toMatchObject({ code: 0 });
  expect(stateOf(both)).toEqual({ analyses: [1, 2], wrong: [] });
  expect(looks).toBeGreaterThan(3);
  const db = openForReading(both);
  for (const [id, states] of seen) expect([...states]).toEqual([rowsOf(db, id).join(" ")]);
  db.close();
  expect(
    readdirSync(dir)
      .filter((f) => f.startsWith("both.sqlite"))
      .sort(),
  ).toEqual(["both.sqlite", "both.sqlite.cache"]);

  copyFileSync(both, one);
  expect(coldseam("forget", "kv30-b", "--db", one, "--yes")).toMatchObject({ code: 0 });
  expect(stateOf(one)).toMatchObject({ analyses: [expect.any(Number)], wrong: [] });
});

test("an ingest killed at any moment leaves all of its analysis or nothing; running again completes", async () => {
  const report = await killIngests(
    (db) => run("ingest", yamlA, "--db", db, "--workers", "0"),
    dir,
    spreadMoments(4, 8, 60, 5),
    "last",
  );
  expect(report.wrong).toEqual([]);
  expect(report.kills - report.late).toBeGreaterThan(1);
});

test("a merge killed at any moment, into an old or a new file, leaves all of it or nothing", async () => {
  const wrong: string[] = [];
  const left = new Set<number>();
  const whole = await runAndKill(run("merge", both, "--into", at("merge.sqlite")), { afterLines: 99, delayMs: 0 });
  expect(whole.inTime).toBe(false);
  for (let k = 0; k < 10; k++) {
    const lab = at(`merge-${k}.sqlite`);
    // Every second time the file holds one of the two cooldowns already; that one must survive as well.
    const old = k % 2 === 1;
    if (old) copyFileSync(one, lab);
    await runAndKill(run("merge", both, "--into", lab), { afterLines: 0, delayMs: (whole.livedMs * (k + 4)) / 13 });
    const state = stateOf(lab);
    wrong.push(...state.wrong);
    left.add(state.analyses.length);
    if (state.analyses.length < (old ? 1 : 0)) wrong.push(`merge ${k}: what was there is gone`);
    if (!old && state.analyses.length === 1) wrong.push(`merge ${k}: half of what was merged`);
  }
  expect(wrong).toEqual([]);
  // Some were killed before they had stored anything, and some after.
  expect(left.size).toBeGreaterThan(1);
  expect(stateOf(both)).toEqual({ analyses: [1, 2], wrong: [] });
});

test("files that change or go while they are analysed stop the run; nothing is stored", async () => {
  const folder = at("changing");
  const yaml = generateStack(tinyCooldown("kv30-changing", 3), folder);
  const file = at("changing.sqlite");
  let done = false;
  const r = await watched(
    (line) => {
      if (done || !/levels|measuring/.test(line)) return;
      done = true;
      // One byte of an image that has been read already; another file moved away.
      appendFileSync(path.join(folder, "cooling_amplitude.tif"), "x");
      rmSync(path.join(folder, "warming_topography.tif"));
    },
    {},
    "ingest",
    yaml,
    "--db",
    file,
    "--workers",
    "0",
  );
  expect(done).toBe(true);
  expect(r.code).toBe(1);
  expect(r.err).toMatch(/cooling_amplitude\.tif: changed while it was analysed: (\d+) bytes, SHA-256 \w{12}… at first/);
  expect(r.err).toMatch(/warming_topography\.tif: no such file/);
  expect(r.err).toMatch(/2 problems; nothing was written/);
  expect(stateOf(file).analyses).toEqual([]);
});

test("scratch files spoilt under the run: the frame is named, the run ends cleanly, its scratch folder goes", async () => {
  const scratch = at("scratch");
  mkdirSync(scratch);
  const file = at("scratch.sqlite");
  let done = false;
  const r = await watched(
    (line) => {
      if (done || !/placing|levels/.test(line)) return;
      done = true;
      for (const d of readdirSync(scratch))
        for (const f of readdirSync(path.join(scratch, d)))
          if (f === "clean-2") writeFileSync(path.join(scratch, d, f), "spoilt");
    },
    { TMPDIR: scratch },
    "ingest",
    yamlA,
    "--db",
    file,
    "--workers",
    "1",
  );
  expect(done).toBe(true);
  expect(r.code).toBe(1);
  expect(r.err).toMatch(/(levels of|measuring) frame 2: /);
  expect(readdirSync(scratch)).toEqual([]);
  expect(stateOf(file)).toEqual({ analyses: [], wrong: [] });
});

describe.runIf(MAY_MOUNT)("on a small or write-protected file system of its own", () => {
  const quoted = (...words: string[]): string => words.map((w) => `'${w}'`).join(" ");
  /** Lines of a script: a folder `$S` on a file system in memory. */
  const small = (kilobytes: number): string =>
    `S=${quoted(at("small"))}; mkdir -p $S; mount -t tmpfs -o size=${kilobytes}k tmpfs $S\n`;
  const command = (...args: string[]): string => `${quoted(process.execPath, ENTRY)} ${args.join(" ")}`;

  test("a full disk: said in words, and the database is as before", () => {
    // The file of two cooldowns grows by one with the merge; from no room at all to nearly enough.
    const before = stateOf(one).analyses;
    const kilobytes = Math.ceil(readFileSync(one).length / 1024);
    let full = 0;
    for (const room of [0, 36, 48, 110]) {
      const r = inNamespace(
        `${small(kilobytes + room)} cp ${quoted(one)} $S/lab.sqlite
         ${command("merge", quoted(both), "--into", "$S/lab.sqlite")} && echo done || echo failed
         mkdir -p ${quoted(at("out"))}; rm -f ${quoted(at("out"))}/*; cp $S/lab.sqlite* ${quoted(at("out"))}/`,
      );
      const state = stateOf(path.join(at("out"), "lab.sqlite"));
      expect(state.wrong, `${room} kB: ${r.err}`).toEqual([]);
      if (r.out.includes("done")) {
        expect(state.analyses).toHaveLength(2);
        continue;
      }
      full++;
      expect(r.err, `${room} kB`).toMatch(/lab\.sqlite: (no space left on its disk|the disk reported an error)/);
      expect(r.err).toMatch(/fix: /);
      expect(state.analyses).toEqual(before);
    }
    expect(full).toBeGreaterThan(1);
  });

  test("a full disk: an ingest that failed leaves no new file and no log, and an old database byte by byte as it was", () => {
    const kilobytes = Math.ceil(readFileSync(one).length / 1024);
    const ingest = command("ingest", quoted(yamlB), "--db", "$S/lab.sqlite", "--workers", "1");
    // No room for the tables, for the tables only, and for a part of the analysis.
    for (const room of [24, 100, 200]) {
      const r = inNamespace(`${small(room)} ${ingest} && echo done || ls $S`);
      expect(r.out, `${room} kB: ${r.err}`).toBe("");
      expect(r.err).toMatch(/no space left on its disk; the database is as it was\n {2}fix: free some space/);
    }
    const old = quoted(one);
    for (const room of [44, 100]) {
      const r = inNamespace(
        `${small(kilobytes + room)} cp ${old} $S/lab.sqlite; ${ingest} && echo done || true; cmp ${old} $S/lab.sqlite && ls $S`,
      );
      expect(r.out, `${room} kB: ${r.err}`).toBe("lab.sqlite\n");
    }
  });

  test("a disk filled by the cache: it goes, and the analysis is stored", () => {
    const cache = at("filling.cache");
    openCache(cache, 1e9, { rasters: 0, small: 0 });
    writeEntry(cache, `map-${"0".repeat(64)}`, new Uint8Array(2 ** 21));
    const kilobytes = Math.ceil(readFileSync(one).length / 1024) + 2158;
    const r = inNamespace(
      `${small(kilobytes)} cp ${quoted(one)} $S/lab.sqlite; cp -r ${quoted(cache)} $S/lab.sqlite.cache
       ${command("ingest", quoted(yamlB), "--db", "$S/lab.sqlite", "--workers", "1")} >/dev/null && ls $S; cp $S/lab.sqlite ${quoted(at("filled.sqlite"))}`,
    );
    expect(r.err).toMatch(/note: cache: deleted, as its disk was full/);
    expect(r.out).toBe("lab.sqlite\n");
    expect(stateOf(at("filled.sqlite"))).toMatchObject({
      analyses: [expect.any(Number), expect.any(Number)],
      wrong: [],
    });
  });

  test("a full disk under what a command writes: said with what helps, and no part of it stays", () => {
    const r = inNamespace(
      `${small(64)} dd if=/dev/zero of=$S/fill bs=1k 2>/dev/null || true
       ${command("report", "--db", quoted(one), "--out", "$S/r.html")} || ls $S
       ${command("figure", "loop", "--db", quoted(one), "--out", "$S/f.svg")} || ls $S
       ${command("export", "walls", "--db", quoted(one), "--out", "$S/w.csv")} || ls $S
       ${command("export", "walls", "--db", quoted(one))} > $S/w.csv || true`,
    );
    expect(r.out).toBe("fill\nfill\nfill\n");
    for (const name of ["r.html", "f.svg", "w.csv"])
      expect(r.err).toMatch(
        new RegExp(`${name}: cannot be written: no space left on its disk\\n {2}fix: free some space`),
      );
    expect(r.err).toMatch(/the output: cannot be written: no space left on its disk\n {2}fix: free some space/);
    expect(r.err).not.toMatch(/ {4}at |folder that exists/);
  });

  test("no room for the scratch files: said in words, nothing stored, nothing left", () => {
    const r = inNamespace(
      `${small(16)} TMPDIR=$S ${command("ingest", quoted(yamlA), "--db", quoted(at("noroom.sqlite")), "--workers", "1")} || echo $? $(ls $S)`,
    );
    expect(r.out).toBe("1\n");
    expect(r.err).toMatch(/small: no space left for the scratch files\n {2}fix: set TMPDIR/);
    expect(readdirSync(dir).filter((f) => f.startsWith("noroom"))).toEqual([]);
  });

  test("a read-only folder: whatever would write says so at once, whatever reads goes on", () => {
    const r = inNamespace(
      `${small(2000)} cp ${quoted(both)} $S/lab.sqlite; mount -o remount,ro $S
       ${command("ingest", quoted(yamlA), "--db", "$S/lab.sqlite", "--set", "run.seed=4")} || echo ingest $?
       ${command("forget", "kv30-a", "--yes", "--db", "$S/lab.sqlite")} || echo forget $?
       ${command("ingest", quoted(yamlA), "--db", "$S/new.sqlite")} || echo new $?
       ${command("loops", "--db", "$S/lab.sqlite")} > ${quoted(at("loops.txt"))}
       ${command("verify", "--db", "$S/lab.sqlite")} | tail -1
       ${command("merge", "$S/lab.sqlite", "--into", quoted(at("fromreadonly.sqlite")))} | head -1
       cp $S/lab.sqlite ${quoted(at("after.sqlite"))}`,
    );
    expect(r.out).toMatch(/^ingest 1\nforget 1\nnew 1\n.*lab\.sqlite: sound, \d+ checks\n.*2 analyses added/);
    expect(r.err.match(/: (may not be written|cannot be opened)/g)).toHaveLength(3);
    expect(r.err).not.toMatch(/fault of the program|% /);
    expect(readFileSync(at("loops.txt"), "utf8")).toContain("kv30-a");
    expect(sha(at("after.sqlite"))).toBe(sha(both));
  });

  test("a read-only file in a writable folder: the same", () => {
    const r = inNamespace(
      `${small(2000)} cp ${quoted(both)} $S/lab.sqlite; mount --bind $S/lab.sqlite $S/lab.sqlite; mount -o remount,bind,ro $S/lab.sqlite
       ${command("ingest", quoted(yamlA), "--db", "$S/lab.sqlite", "--set", "run.seed=4")} || echo ingest $?
       ${command("cooldowns", "--db", "$S/lab.sqlite")} | head -1
       cp $S/lab.sqlite ${quoted(at("after.sqlite"))}`,
    );
    expect(r.out).toBe("ingest 1\nkv30-a\n");
    expect(r.err).toMatch(/lab\.sqlite: may not be written/);
    expect(r.err).not.toMatch(/\d %/);
    expect(sha(at("after.sqlite"))).toBe(sha(both));
  });
});

test.skipIf(MAY_MOUNT)("full and write-protected disks are not tested here: this machine does not allow mounts", () => {
  expect(MAY_MOUNT).toBe(false);
});

describe("a damaged database given as --db", () => {
  const commands = (db: string): string[][] => [
    ["ingest", yamlA, "--db", db],
    ["loops", "--db", db],
    ["verify", "--db", db],
    ["forget", "kv30-a", "--yes", "--db", db],
    ["merge", both, "--into", db],
  ];

  test("every command refuses it with words, and leaves it as it is", () => {
    const db = at("damaged.sqlite");
    const bytes = readFileSync(both);
    writeFileSync(db, Buffer.concat([bytes.subarray(0, 8192), Buffer.alloc(bytes.length - 8192, 0x5a)]));
    const before = sha(db);
    for (const args of commands(db)) {
      const r = coldseam(...args);
      expect(r.code, args.join(" ")).toBe(1);
      expect(r.err + r.out, args.join(" ")).toMatch(/not a sound SQLite database|WRONG/);
      expect(r.err).not.toContain("fault of the program");
      expect(sha(db), args.join(" ")).toBe(before);
    }
    expect(readdirSync(dir).filter((f) => f.startsWith("damaged"))).toEqual(["damaged.sqlite"]);
  });
});
