import type { Analysis, FrameResult } from "../model/analysis.js";
import type { FrameInfo } from "../model/cooldown.js";
import type { DomainRegion } from "../model/domains.js";
import type { Db } from "./open.js";

type Value = number | string | null | Uint8Array;

/** SQLite stores NaN as NULL without a word; a NaN here is a fault of the program and must not pass for "not measured". */
function checked(table: string, row: Record<string, Value>): Record<string, Value> {
  for (const [column, v] of Object.entries(row))
    if (typeof v === "number" && !Number.isFinite(v))
      throw new Error(`${table}.${column} is ${v} (frame ${String(row["frame"])})`);
  return row;
}

/** A prepared insert whose columns are the keys of the first row. */
export function inserter(db: Db, table: string): (row: Record<string, Value>) => void {
  let run: ((row: Record<string, Value>) => void) | null = null;
  return (row) => {
    if (run === null) {
      const keys = Object.keys(row);
      const statement = db.prepare(
        `INSERT INTO ${table} (${keys.join(", ")}) VALUES (${keys.map((k) => `@${k}`).join(", ")})`,
      );
      run = (r) => void statement.run(checked(table, r));
    }
    run(row);
  };
}

const bit = (b: boolean): number => (b ? 1 : 0);

/** Why a number of this frame is missing or doubtful, as short words separated by blanks. */
function frameFlag(info: FrameInfo, r: FrameResult): string {
  if (info.excluded !== undefined) return "left-out";
  const words: string[] = [];
  if (r.verdict === "undecided") words.push("undecided");
  if (r.drift.xNm === null) words.push("not-placed");
  return words.join(" ");
}

function frameRow(id: number, info: FrameInfo, r: FrameResult): Record<string, Value> {
  const decided = r.verdict !== "undecided";
  return {
    analysis_id: id,
    frame: r.frame,
    branch: info.branch,
    cycle: info.cycle,
    temperature_k: info.temperatureK,
    started_at: info.startedAt,
    ended_at: info.endedAt,
    drift_x_nm: r.drift.xNm,
    drift_y_nm: r.drift.yNm,
    drift_sd_nm: r.drift.sdNm,
    verdict: r.verdict,
    metallic_fraction: r.fraction?.value ?? null,
    metallic_fraction_low: r.fraction?.low ?? null,
    metallic_fraction_high: r.fraction?.high ?? null,
    amplitude_insulating: r.amplitudeInsulating,
    amplitude_metallic: r.amplitudeMetallic,
    gain: r.gain,
    metallic_domains: decided ? r.regions.filter((g) => g.kind === "metallic").length : null,
    insulating_domains: decided ? r.regions.filter((g) => g.kind === "insulating").length : null,
    wall_length_nm: decided ? r.wallLengthNm : null,
    profiles: r.widths.profiles,
    wall_width_median_nm: r.widths.medianNm,
    wall_width_median_low_nm: r.widths.medianLowNm,
    wall_width_median_high_nm: r.widths.medianHighNm,
    unresolved_share: r.widths.unresolvedShare,
    fringe_share: r.fringeShare,
    flag: frameFlag(info, r),
    usable_pixels: r.usablePixels,
    debris_pixels: r.debrisPixels,
    scar_pixels: r.scarPixels,
    map_rows: r.map.rows,
    map_cols: r.map.cols,
    map_deflated: r.map.deflated,
    temperature_sd_k: info.temperatureSdK ?? null,
    ramp_k_per_s: info.rampKPerS ?? null,
    lag_shift_k: info.lagShiftK ?? null,
    amplitude_noise_relative: r.noise?.amplitudeRelative ?? null,
    phase_noise_rad: r.noise?.phaseRad ?? null,
    topography_noise_nm: r.noise?.topographyNm ?? null,
    noise_by_retrace: r.noise?.byRetrace.join(" ") ?? null,
  };
}

/** Inserts every row of an analysis; must run inside the transaction that made the analysis row. */
export function insertAnalysisRows(db: Db, id: number, analysis: Analysis): void {
  const source = inserter(db, "source");
  for (const s of analysis.cooldown.sources)
    source({ analysis_id: id, path: s.path, sha256: s.sha256, bytes: s.bytes });
  const notice = inserter(db, "notice");
  for (const n of analysis.notices) notice({ analysis_id: id, frame: n.frame, code: n.code, message: n.message });

  const frame = inserter(db, "frame");
  const wall = inserter(db, "wall");
  const profile = inserter(db, "profile");
  const fringe = inserter(db, "fringe");
  for (const r of analysis.frames) {
    frame(frameRow(id, analysis.cooldown.frames[r.frame] as FrameInfo, r));
    for (const w of r.walls)
      wall({
        analysis_id: id,
        frame: r.frame,
        wall: w.wall,
        closed: bit(w.closed),
        length_nm: w.lengthNm,
        points: new Uint8Array(Float32Array.from(w.points).buffer),
      });
    for (const p of r.profiles)
      profile({
        analysis_id: id,
        frame: r.frame,
        wall: p.wall,
        profile: p.profile,
        x_nm: p.xNm,
        y_nm: p.yNm,
        normal_deg: p.normalDeg,
        arc_nm: p.arcNm,
        stretch_nm: p.stretchNm,
        width_nm: p.widthNm,
        width_sd_nm: p.widthSdNm,
        width_sd_tip_nm: p.widthSdTipNm,
        width_upper95_nm: p.widthUpper95Nm,
        resolved: bit(p.widthNm !== null),
        apparent_width_nm: p.apparentWidthNm,
        amplitude_insulating: p.amplitudeInsulating,
        amplitude_metallic: p.amplitudeMetallic,
        reduced_chi2: p.reducedChi2,
        pixels: p.pixels,
        flag: p.flag,
      });
    for (const t of r.fringes)
      fringe({
        analysis_id: id,
        frame: r.frame,
        wall: t.wall,
        stretch: t.stretch,
        arc_from_nm: t.arcFromNm,
        arc_to_nm: t.arcToNm,
        detected: bit(t.detected),
        p_value: t.pValue,
        adjusted_p: t.adjustedP,
        side: t.side,
        contrast_rad: t.contrastRad,
        contrast_sd_rad: t.contrastSdRad,
        offset_nm: t.offsetNm,
        period_nm: t.periodNm,
        period_sd_nm: t.periodSdNm,
        decay_nm: t.decayNm,
        decay_sd_nm: t.decaySdNm,
      });
  }
  insertDomains(db, id, analysis);
  insertLoops(db, id, analysis);
}

function insertDomains(db: Db, id: number, analysis: Analysis): void {
  const domain = inserter(db, "domain");
  const appearance = inserter(db, "domain_appearance");
  const regions = new Map<number, Map<number, DomainRegion>>();
  for (const r of analysis.frames) regions.set(r.frame, new Map(r.regions.map((g) => [g.label, g])));
  for (const d of analysis.domains) {
    domain({ analysis_id: id, domain: d.domain, kind: d.kind, origin: d.origin, fate: d.fate });
    for (const a of d.appearances) {
      const g = regions.get(a.frame)?.get(a.label);
      if (g === undefined) throw new Error(`domain ${d.domain}: frame ${a.frame} has no region ${a.label}`);
      appearance({
        analysis_id: id,
        domain: d.domain,
        frame: a.frame,
        area_nm2: g.areaNm2,
        perimeter_nm: g.perimeterNm,
        x_nm: g.xNm,
        y_nm: g.yNm,
        touches_border: bit(g.touchesBorder),
      });
    }
  }
}

function insertLoops(db: Db, id: number, analysis: Analysis): void {
  const loop = inserter(db, "loop");
  for (const l of analysis.loops)
    loop({
      analysis_id: id,
      cycle: l.cycle,
      cooling_half_k: l.coolingHalfK.value,
      cooling_half_low_k: l.coolingHalfK.low,
      cooling_half_high_k: l.coolingHalfK.high,
      warming_half_k: l.warmingHalfK.value,
      warming_half_low_k: l.warmingHalfK.low,
      warming_half_high_k: l.warmingHalfK.high,
      width_k: l.widthK.value,
      width_low_k: l.widthK.low,
      width_high_k: l.widthK.high,
      area_k: l.areaK,
      lowest_fraction: l.lowestFraction,
      highest_fraction: l.highestFraction,
      complete: bit(l.complete),
    });
}
