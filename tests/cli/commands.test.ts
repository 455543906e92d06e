import { existsSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { promisesOf } from "../../src/cli/demo_run.js";
import { defaultSpec, generateStack, readTruth } from "../../src/demo/index.js";
import { openForReading } from "../../src/store/open.js";
import { scoreCooldown } from "../../src/study/score.js";
import { TABLES } from "../../src/tables/columns.js";
import { coldseam, coldseamInterrupted, TOP } from "./program.js";

const COMMANDS = [
  "check",
  "draft",
  "ingest",
  "cooldowns",
  "loops",
  "walls",
  "export",
  "figure",
  "report",
  "tip",
  "verify",
  "forget",
  "merge",
  "cache",
  "settings",
  "demo",
];

let dir: string;
let db: string;
/** A very small cooldown, for what does not need a good one. */
let tiny: string;
const yaml = (run: number): string => path.join(dir, `demo/kv14-run${run}/cooldown.yaml`);

beforeAll(() => {
  dir = mkdtempSync(path.join(tmpdir(), "coldseam-cli-"));
  db = path.join(dir, "lab.sqlite");
  tiny = generateStack(
    defaultSpec({
      cooldown: "tiny",
      rows: 64,
      cols: 64,
      seed: 3,
      domains: { scaleNm: 120 },
      wall: { widthNm: 50 },
      series: [
        { branch: "cooling", temperaturesK: [180, 155, 151, 120] },
        { branch: "warming", temperaturesK: [150, 160, 190] },
      ],
      drift: { stepSdNm: 15, jumpChance: 0, limitNm: 60 },
    }),
    path.join(dir, "tiny"),
  );
  const made = coldseam("demo", path.join(dir, "demo"), "--size", "small");
  if (made.code !== 0) throw new Error(made.err);
  for (const run of [1, 2]) {
    const r = coldseam("ingest", yaml(run), "--db", db);
    if (r.code !== 0) throw new Error(r.err);
  }
}, 300_000);
afterAll(() => rmSync(dir, { recursive: true, force: true }));

describe("the demo's small copy, through the front door", () => {
  test.each([1, 2])("run %i keeps every promise of the demo", (run) => {
    const handle = openForReading(db);
    const truth = readTruth(path.dirname(yaml(run)));
    const kept = promisesOf(scoreCooldown(handle, truth), truth.hasFringes);
    handle.close();
    expect(kept.filter((k) => !k.holds)).toEqual([]);
  });

  test("any number of workers gives the same tables to the bit", () => {
    const exported = (workers: string): string[] => {
      const file = path.join(dir, `workers-${workers}.sqlite`);
      const r = coldseam("ingest", tiny, "--db", file, "--workers", workers);
      expect(r.code, r.err).toBe(0);
      return TABLES.map((t) => coldseam("export", t.name, "--db", file).out);
    };
    const none = exported("0");
    expect(none.every((t) => t.split("\n").length > 2)).toBe(true);
    expect(exported("3")).toEqual(none);
  });

  test("the same work is recognised; other settings stand beside it and are named", () => {
    const file = path.join(dir, "two.sqlite");
    expect(coldseam("ingest", tiny, "--db", file).code).toBe(0);
    const again = coldseam("ingest", tiny, "--db", file);
    expect(again).toMatchObject({ code: 0 });
    expect(again.out).toMatch(/already in .* as analysis 1/);
    expect(coldseam("ingest", tiny, "--db", file, "--set", "run.seed=5").code).toBe(0);
    const listed = coldseam("cooldowns", "--db", file);
    expect(listed.out).toContain("newest of 2");
    expect(listed.out).toContain("run.seed=5");
  });

  test("every table exports with the columns of its view, empty fields for what is missing", () => {
    const handle = new Database(db, { readonly: true });
    for (const t of TABLES) {
      const lines = coldseam("export", t.name, "--db", db, "--cooldown", "kv14-run1").out.trimEnd().split("\n");
      expect(lines[0]).toBe(t.columns.map((c) => c.name).join(","));
      const n = handle.prepare(`SELECT count(*) AS n FROM ${t.view} WHERE cooldown = 'kv14-run1'`).get() as {
        n: number;
      };
      expect(lines.length - 1).toBe(n.n);
      expect(lines.join("\n")).not.toMatch(/NaN|null|undefined/);
    }
    handle.close();
  });

  test("export to a file, as json, and to a place that cannot be written", () => {
    const out = path.join(dir, "loops.json");
    expect(coldseam("export", "loops", "--db", db, "--format", "json", "--out", out).code).toBe(0);
    const rows = JSON.parse(readFileSync(out, "utf8")) as { cooldown: string }[];
    expect(rows.map((r) => r.cooldown)).toEqual(["kv14-run1", "kv14-run2"]);
    const bad = coldseam("export", "loops", "--db", db, "--out", path.join(dir, "no/such/folder.csv"));
    expect(bad.code).toBe(1);
    expect(bad.err).toMatch(
      /no\/such\/folder\.csv: cannot be written: the folder .*no\/such does not exist\n {2}fix: /,
    );
    expect(bad.err).not.toMatch(/ENOENT|\.part/);
    const before = readFileSync(db);
    const slip = coldseam("export", "loops", "--db", db, "--out", db);
    expect(slip.code).toBe(2);
    expect(slip.err).toContain("expected a name that ends in .csv");
    expect(readFileSync(db).equals(before)).toBe(true);
  });

  test("loops and walls print within 80 columns", () => {
    for (const command of ["loops", "walls"]) {
      const r = coldseam(command, "--db", db);
      expect(r.code, r.err).toBe(0);
      expect(Math.max(...r.out.split("\n").map((l) => l.length))).toBeLessThanOrEqual(80);
    }
    expect(coldseam("loops", "--db", db).out).toContain("half temperature, cooling");
  });
});

describe("interrupted runs", () => {
  test("Ctrl-C leaves the database as it was: a new one is not there", async () => {
    const file = path.join(dir, "stopped.sqlite");
    const r = await coldseamInterrupted("SIGINT", /\d+ %/, "ingest", yaml(1), "--db", file);
    expect(r.code).toBe(130);
    expect(r.err).toContain("stopped; the database is as it was");
    expect(readdirSync(dir).filter((f) => f.startsWith("stopped"))).toEqual([]);
  });
});

describe("what the command line says", () => {
  test.each(COMMANDS)("%s has help, and a place in the README", (command) => {
    const r = coldseam(command, "--help");
    expect(r.code).toBe(0);
    expect(r.out).toContain(`Usage: coldseam ${command}`);
    expect(readFileSync(path.join(TOP, "README.md"), "utf8")).toContain(`coldseam ${command}`);
  });

  test("a wrong command line ends with 2 and says what would be right", () => {
    expect(coldseam("export", "wals", "--db", db)).toMatchObject({ code: 2, out: "" });
    expect(coldseam("export", "wals", "--db", db).err).toContain('did you mean "walls"?');
    expect(coldseam("ingst").code).toBe(2);
    expect(coldseam("ingest", yaml(1)).err).toContain("--db");
    const set = coldseam("ingest", yaml(1), "--db", db, "--set", "run.sed=1");
    expect(set).toMatchObject({ code: 2 });
    expect(set.err).toContain('did you mean "run.seed"?');
    expect(coldseam("ingest", yaml(1), "--db", db, "--set", "run.seed=many").code).toBe(2);
    expect(coldseam("ingest", yaml(1), "--db", db, "--workers", "-1").code).toBe(2);
  });

  test("input that cannot be used ends with 1, names the place and makes no database", () => {
    const missing = coldseam("check", path.join(dir, "none.yaml"));
    expect(missing.code).toBe(1);
    expect(missing.err).toMatch(/none\.yaml/);
    expect(missing.err).toMatch(/fix: /);
    const file = path.join(dir, "bad.yaml");
    writeFileSync(file, "sample: S\ncooldown: c\nscn: 1\n");
    const bad = coldseam("check", file);
    expect(bad.code).toBe(1);
    expect(bad.err).toContain("bad.yaml:3");
    expect(coldseam("loops", "--db", path.join(dir, "none.sqlite")).code).toBe(1);
    expect(existsSync(path.join(dir, "none.sqlite"))).toBe(false);
    expect(coldseam("loops", "--db", db, "--cooldown", "nobody").err).toContain("it holds kv14-run1, kv14-run2");
  });

  test("check reads everything and writes nothing", () => {
    const r = coldseam("check", yaml(1));
    expect(r.code, r.err).toBe(0);
    expect(r.out).toContain("16 frames");
    expect(r.out).toContain("next: coldseam ingest");
  });

  test("settings lists every setting with its default and unit", () => {
    const all = JSON.parse(coldseam("settings", "--format", "json").out) as {
      name: string;
      means: string;
      unit: string;
    }[];
    expect(all.length).toBeGreaterThan(10);
    expect(all.every((s) => s.means.length > 8)).toBe(true);
    const text = coldseam("settings").out;
    for (const s of all) expect(text).toContain(s.name);
  });
});
