import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { analyse } from "../analyse.js";
import { generateStack, readTruth, type CooldownSpec, type CooldownTruth } from "../demo/index.js";
import { readCooldown } from "../input/index.js";
import { settingsWith } from "../settings.js";
import { openForWriting, type Db } from "../store/open.js";
import { saveAnalysis } from "../store/save.js";
import { scoreEvents } from "./event_score.js";
import { scoreCooldown, type Score } from "./score.js";

/** Simulates one cooldown, takes it through the front door (files, analysis, database), and scores what comes out.
 *  @param inspect sees the database before it is thrown away */
export async function runOnce(
  spec: CooldownSpec,
  workers: number,
  overrides: readonly string[] = [],
  inspect?: (db: Db, truth: CooldownTruth) => void,
): Promise<Score> {
  const dir = mkdtempSync(path.join(tmpdir(), "coldseam-study-"));
  try {
    const yaml = generateStack(spec, path.join(dir, "cooldown"));
    const cooldown = await readCooldown(yaml);
    const settings = settingsWith(overrides);
    const analysis = await analyse(cooldown, { settings, programVersion: "study", workers });
    const db = openForWriting(path.join(dir, "study.sqlite"));
    try {
      saveAnalysis(db, analysis, new Date(0));
      const truth = readTruth(path.dirname(yaml));
      inspect?.(db, truth);
      return scoreCooldown(db, truth, {
        fractions: truth.frames.map((f) => f.metallicFraction),
        events: scoreEvents(spec, analysis, settings),
      });
    } finally {
      db.close();
      analysis.release?.();
    }
  } finally {
    rmSync(dir, { recursive: true, force: true });
  }
}
