import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { inflateSync } from "node:zlib";
import { analyse } from "../analyse.js";
import { generateStack, readTruth, simulateCooldown, type CooldownSpec, type CooldownTruth } from "../demo/index.js";
import type { Analysis } from "../model/analysis.js";
import { NO_STATE } from "../model/signal.js";
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
        fractions: mappedFractions(spec, analysis),
        events: scoreEvents(spec, analysis, settings),
      });
    } finally {
      db.close();
    }
  } finally {
    rmSync(dir, { recursive: true, force: true });
  }
}

/** True metallic fraction of each frame over the pixels that the program gave a state: its own choice of what is debris then has no part in
 *  the error. Null where it gave none. */
function mappedFractions(spec: CooldownSpec, analysis: Analysis): (number | null)[] {
  const cooldown = simulateCooldown(spec);
  return analysis.frames.map((f, k) => {
    const map = inflateSync(f.map.deflated);
    const { states } = cooldown.frame(k).truth;
    let mapped = 0;
    let metallic = 0;
    for (let i = 0; i < map.length; i++) {
      if (map[i] === NO_STATE) continue;
      mapped++;
      if (states[i] === 1) metallic++;
    }
    return mapped === 0 ? null : metallic / mapped;
  });
}
