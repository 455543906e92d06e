// A database as a laboratory would have it after years, made by SQL from one small analysis: every row is a copy of a real one.
import { existsSync, mkdirSync, renameSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import Database from "better-sqlite3";
import { newestVersion } from "../../dist/store/migrate.js";
import { generatedCooldown } from "./data.mjs";
import { measuredIn } from "./run_child.mjs";

/** Path of a database of so many cooldowns, frames a cooldown and profiles a frame; kept between runs. */
export async function largeDatabase(cooldowns, frames, profilesAFrame) {
  const folder = path.join(tmpdir(), "coldseam-bench");
  const file = path.join(folder, `store-${newestVersion()}-${cooldowns}-${frames}-${profilesAFrame}.sqlite`);
  if (existsSync(file)) return file;
  mkdirSync(folder, { recursive: true });
  const part = `${file}.${process.pid}.part`;
  try {
    const yaml = await generatedCooldown(128, 6);
    measuredIn("ingest_child.mjs", [yaml, part, 2]);
    console.error(`making a database of ${cooldowns} cooldowns, ${cooldowns * frames * profilesAFrame} profiles …`);
    multiply(part, cooldowns, frames, profilesAFrame);
    renameSync(part, file);
  } finally {
    for (const end of ["", "-wal", "-shm"]) rmSync(part + end, { force: true });
  }
  return file;
}

function multiply(file, cooldowns, frames, profilesAFrame) {
  const db = new Database(file);
  db.pragma("journal_mode = OFF");
  db.pragma("synchronous = OFF");
  db.pragma("foreign_keys = OFF");
  const columns = (table) =>
    db
      .prepare("SELECT name FROM pragma_table_info(?) ORDER BY cid")
      .all(table)
      .map((r) => r.name);
  /** INSERT … SELECT of all columns of a table, some of them replaced by other expressions. */
  const copy = (table, instead, from) => {
    const names = columns(table);
    const values = names.map((n) => instead[n] ?? `s.${n}`);
    return db.prepare(`INSERT INTO ${table} (${names.join(", ")}) SELECT ${values.join(", ")} FROM ${from}`);
  };
  const source = db.prepare("SELECT id, cooldown_id FROM analysis").get();
  const templates = db.prepare("SELECT count(*) AS n FROM frame").get().n;
  const fullest = db.prepare("SELECT frame FROM profile GROUP BY frame ORDER BY count(*) DESC").get().frame;
  db.exec(`
    CREATE TEMP TABLE number (n INTEGER PRIMARY KEY);
    WITH RECURSIVE c (n) AS (SELECT 0 UNION ALL SELECT n + 1 FROM c WHERE n < ${Math.max(frames, profilesAFrame)}) INSERT INTO number SELECT n FROM c;
    CREATE TEMP TABLE some_profile AS SELECT row_number() OVER (ORDER BY wall, profile) - 1 AS nth, * FROM profile WHERE frame = ${fullest};
    CREATE UNIQUE INDEX temp.some_by_nth ON some_profile (nth);`);
  const some = db.prepare("SELECT count(*) AS n FROM some_profile").get().n;
  const walls = Math.min(12, profilesAFrame);
  const statements = [
    copy("cooldown", { id: "@to", name: "@name" }, `cooldown s WHERE s.id = ${source.cooldown_id}`),
    copy(
      "analysis",
      { id: "@to", cooldown_id: "@to", work_sha256: "printf('%064x', @to)", content_sha256: "printf('%064x', @to)" },
      `analysis s WHERE s.id = ${source.id}`,
    ),
    copy("notice", { id: "NULL", analysis_id: "@to" }, `notice s WHERE s.analysis_id = ${source.id}`),
    copy(
      "frame",
      {
        analysis_id: "@to",
        frame: "n.n",
        branch: `CASE WHEN n.n < ${frames / 2} THEN 'cooling' ELSE 'warming' END`,
        cycle: "1",
        temperature_k: `CASE WHEN n.n < ${frames / 2} THEN 200 - n.n ELSE 100 + n.n END`,
      },
      `number n JOIN frame s ON s.analysis_id = ${source.id} AND s.frame = n.n % ${templates} WHERE n.n < ${frames}`,
    ),
    copy(
      "wall",
      { analysis_id: "@to", frame: "f.n", wall: "w.n" },
      `number f JOIN number w JOIN (SELECT * FROM wall WHERE analysis_id = ${source.id} AND frame = ${fullest} LIMIT 1) s
       WHERE f.n < ${frames} AND w.n < ${walls}`,
    ),
    copy(
      "profile",
      { analysis_id: "@to", frame: "f.n", wall: `p.n * ${walls} / ${profilesAFrame}`, profile: "p.n" },
      `number f JOIN number p JOIN some_profile s ON s.nth = p.n % ${some} WHERE f.n < ${frames} AND p.n < ${profilesAFrame} ORDER BY f.n, p.n`,
    ),
    copy("domain", { analysis_id: "@to" }, `domain s WHERE s.analysis_id = ${source.id}`),
    copy("domain_appearance", { analysis_id: "@to" }, `domain_appearance s WHERE s.analysis_id = ${source.id}`),
    copy("loop", { analysis_id: "@to" }, `loop s WHERE s.analysis_id = ${source.id}`),
  ];
  for (let k = 0; k < cooldowns; k++) {
    const values = { to: 1000 + k, name: `years-${String(k).padStart(4, "0")}` };
    for (const s of statements)
      s.run(Object.fromEntries(Object.entries(values).filter(([n]) => s.source.includes(`@${n}`))));
  }
  db.prepare("DELETE FROM cooldown WHERE id = ?").run(source.cooldown_id);
  for (const table of [
    "profile_bins",
    "fringe_bins",
    "preview",
    "drift_pair",
    "fringe",
    "source",
    "notice",
    "loop",
    "domain_appearance",
    "domain",
    "profile",
    "wall",
    "frame",
  ])
    db.prepare(`DELETE FROM ${table} WHERE analysis_id = ?`).run(source.id);
  db.prepare("DELETE FROM analysis WHERE id = ?").run(source.id);
  const broken = db.pragma("foreign_key_check");
  if (broken.length > 0) throw new Error(`the made database breaks ${broken.length} references`);
  db.exec("VACUUM");
  db.pragma("journal_mode = WAL");
  db.close();
}
