import { existsSync, mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { inflateSync } from "node:zlib";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { gatherReport } from "../../src/cli/report_data.js";
import { defaultSpec, generateStack } from "../../src/demo/index.js";
import { decodeTable } from "../../src/report/codec.js";
import type { ReportData } from "../../src/report/data.js";
import { packReport } from "../../src/report/pack.js";
import { openForReading } from "../../src/store/open.js";
import { madeDatabase } from "../cli/made.js";
import { coldseam } from "../cli/program.js";
import { sampleAnalysis } from "../store/sample_analysis.js";
import { ingestFile } from "./made_report.js";

let folder: string;
let db: string;
let data: ReportData;

beforeAll(async () => {
  folder = mkdtempSync(path.join(tmpdir(), "coldseam-gather-"));
  db = path.join(folder, "lab.sqlite");
  const spec = defaultSpec({
    cooldown: "small",
    rows: 40,
    cols: 36,
    pixel: { xNm: 10, yNm: 12 },
    seed: 3,
    domains: { scaleNm: 90 },
    wall: { widthNm: 40 },
    debris: { perUm2: 0 },
    series: [
      { branch: "cooling", temperaturesK: [156, 151] },
      { branch: "warming", temperaturesK: [158, 162] },
    ],
    drift: { stepSdNm: 10, jumpChance: 0, limitNm: 40 },
  });
  await ingestFile(generateStack(spec, path.join(folder, "small")), db, 0);
  const handle = openForReading(db);
  data = await gatherReport(handle, {}, "1").finally(() => handle.close());
});
afterAll(() => rmSync(folder, { recursive: true, force: true }));

describe("what the page is made from", () => {
  test("every pixel of a domain is of its state, and they add up to its area", () => {
    const [c] = data.cooldowns;
    const kinds = new Map(c.tables.domains.map((r) => [r["domain"], r["kind"]]));
    let looked = 0;
    for (const f of c.frames) {
      const states = inflateSync(f.statesDeflated);
      const rows = c.tables["domain-frames"].filter((r) => r["frame"] === f.frame);
      for (const r of rows) {
        const own = [...(f.domains ?? [])].flatMap((d, k) => (d === (r["domain"] as number) + 1 ? [states[k]] : []));
        expect(new Set(own)).toEqual(new Set([kinds.get(r["domain"] ?? -1) === "metallic" ? 1 : 0]));
        expect(own.length * c.info.pixelXNm * c.info.pixelYNm).toBeCloseTo(r["area_nm2"] as number, 6);
        looked++;
      }
      expect(new Set(f.domains).size).toBe(rows.length + ([...(f.domains ?? [])].includes(0) ? 1 : 0));
    }
    expect(looked).toBeGreaterThan(5);
  });

  test("packed and unpacked, the long table of walls says the same to seven digits, that of the frames the same", () => {
    const { index, chunks } = packReport(data);
    const [c] = index.cooldowns;
    for (const [name, exact] of [
      ["walls", false],
      ["temperature", true],
    ] as const) {
      const { head, chunk } = c.tables[name];
      const back = decodeTable(head, inflateSync(Buffer.from(chunks[chunk], "base64")));
      const rows = data.cooldowns[0].tables[name];
      expect(back).toHaveLength(rows.length);
      back.forEach((r, k) => {
        for (const [column, v] of Object.entries(r)) {
          const was = rows[k][column];
          expect(v).toBe(typeof was === "number" && !exact ? Math.fround(was) : was);
        }
      });
    }
  });

  test("previews and maps are the stored bytes", () => {
    const { index, chunks } = packReport(data);
    data.cooldowns[0].frames.forEach((f, k) => {
      const head = index.cooldowns[0].frames[k];
      expect(Buffer.from(chunks[head.states], "base64").equals(f.statesDeflated)).toBe(true);
      f.previews.forEach((p, j) =>
        expect(Buffer.from(chunks[head.previews[j].chunk], "base64").equals(p.image)).toBe(true),
      );
      expect(f.previews).toHaveLength(3);
    });
  });
});

describe("the command", () => {
  test("says what it wrote; refuses a name that is no page, and costs no database", () => {
    const out = path.join(folder, "page.html");
    const r = coldseam("report", "--db", db, "--out", out);
    expect(r).toMatchObject({ code: 0, out: "" });
    expect(r.err).toMatch(/1 cooldown, 4 frames: written to .*page\.html \(0\.\d MB\)/);
    const before = readFileSync(db);
    const slip = coldseam("report", "--db", db, "--out", db);
    expect(slip.code).toBe(2);
    expect(slip.err).toContain("must end in .html");
    expect(readFileSync(db).equals(before)).toBe(true);
  });

  test("a cooldown that is not there, a folder that is not there", () => {
    const out = path.join(folder, "none.html");
    const unknown = coldseam("report", "--db", db, "--cooldown", "other", "--out", out);
    expect(unknown.code).toBe(1);
    expect(unknown.err).toContain('no cooldown "other"');
    expect(coldseam("report", "--db", db, "--out", path.join(folder, "no/such/page.html")).code).toBe(1);
    expect(existsSync(out)).toBe(false);
  });

  test("an analysis without images or with a map that its domains do not fit still has its page, and that is said", async () => {
    const file = madeDatabase(path.join(folder, "made.sqlite"), sampleAnalysis());
    const r = coldseam("report", "--db", file, "--out", path.join(folder, "made.html"));
    expect(r.code, r.err).toBe(0);
    expect(r.err).toContain("kept no images");
    const handle = openForReading(file);
    const made = await gatherReport(handle, {}, "1").finally(() => handle.close());
    expect(made.cooldowns[0].frames.some((f) => f.domains === null)).toBe(true);
  });
});
