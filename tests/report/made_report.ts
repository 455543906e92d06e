import { mkdtempSync, readFileSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { analyse } from "../../src/analyse.js";
import { defaultSpec, generateStack } from "../../src/demo/index.js";
import { readCooldown } from "../../src/input/index.js";
import { settingsWith } from "../../src/settings.js";
import { openForWriting } from "../../src/store/open.js";
import { saveAnalysis } from "../../src/store/save.js";
import { coldseam } from "../cli/program.js";

/** A name that would do harm wherever it were taken for markup. */
export const HOSTILE = `</script><img src=x onerror="window.hit=1"> & "kv"`;

export interface MadeReport {
  readonly folder: string;
  readonly db: string;
  readonly html: string;
  /** YAML files of its two cooldowns. */
  readonly yaml: readonly [string, string];
}

/** Two small cooldowns of a hostile name each, their database and their page. The first has walls with fringes, the second no
 *  tip's resolution. */
export async function makeReport(): Promise<MadeReport> {
  const folder = mkdtempSync(path.join(tmpdir(), "coldseam-report-"));
  const common = {
    sample: `S ${HOSTILE}`,
    drift: { stepSdNm: 15, jumpChance: 0, limitNm: 60 },
    scars: { perFrame: 0, maxLengthPx: 10 },
    unmeasured: { chance: 0 },
    debris: { perUm2: 0 },
  };
  const walls = defaultSpec({
    ...common,
    cooldown: `a ${HOSTILE}`,
    rows: 48,
    cols: 48,
    seed: 3,
    domains: { scaleNm: 100 },
    wall: { widthNm: 50 },
    fringe: { amplitudeRad: 0.5 },
    series: [
      { branch: "cooling", temperaturesK: [180, 156, 151] },
      { branch: "warming", temperaturesK: [158, 162, 190] },
    ],
  });
  const small = defaultSpec({
    ...common,
    cooldown: "b plain",
    rows: 40,
    cols: 40,
    seed: 3,
    domains: { scaleNm: 90 },
    wall: { widthNm: 40 },
    series: [
      { branch: "cooling", temperaturesK: [156, 151] },
      { branch: "warming", temperaturesK: [158, 162] },
    ],
  });
  const yaml = [generateStack(walls, path.join(folder, "a")), generateStack(small, path.join(folder, "b"))] as const;
  const described = readFileSync(yaml[1], "utf8");
  writeFileSync(yaml[1], described.replace(/^tip:\n(  .*\n)+/m, ""));
  const db = path.join(folder, "lab.sqlite");
  for (const [k, file] of yaml.entries()) await ingestFile(file, db, k);
  const html = path.join(folder, "report.html");
  const made = coldseam("report", "--db", db, "--out", html);
  if (made.code !== 0) throw new Error(made.err);
  return { folder, db, html, yaml };
}

/** @param day the analysis is said to be made so many days after the first of January */
export async function ingestFile(yaml: string, db: string, day: number): Promise<void> {
  const cooldown = await readCooldown(yaml);
  const analysis = await analyse(cooldown, { settings: settingsWith(), programVersion: "0.0.1", workers: 0 });
  const handle = openForWriting(db);
  try {
    saveAnalysis(handle, analysis, new Date(Date.UTC(2026, 0, 1 + day)));
  } finally {
    handle.close();
    analysis.release?.();
  }
}
