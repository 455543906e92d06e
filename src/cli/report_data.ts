import { inflateSync } from "node:zlib";
import { commonScale, must, valuesOf, type Row } from "../figures/index.js";
import type { SettingRecord } from "../model/analysis.js";
import { CHANNELS, type ChannelName, type ExcludedRegion } from "../model/cooldown.js";
import type { DomainMap } from "../model/signal.js";
import {
  REPORT_TABLES,
  type CooldownData,
  type CooldownInfo,
  type ExclusionData,
  type FrameData,
  type ReportData,
  type ReportTable,
  type ScaleData,
} from "../report/data.js";
import { defaultDifferences, settingsWith } from "../settings.js";
import { labelDomains, type DomainSettings } from "../stages/domains/index.js";
import type { Db } from "../store/open.js";
import { readWalls } from "../store/pictures.js";
import { readMap, readNotices, readTable, type Selection } from "../store/read.js";
import {
  readAppearances,
  readFrameFringeBins,
  readFrameProfileBins,
  readPreviews,
  readReportInfo,
  readSources,
  type StoredReportInfo,
} from "../store/report.js";
import { TABLES } from "../tables/columns.js";
import { decodePreview } from "./figure_images.js";

/** Everything a page holds, read from the store; nothing is measured anew.
 *  @param onFrame called after every frame read, with how many of all are done */
export async function gatherReport(
  db: Db,
  sel: Selection,
  programVersion: string,
  onFrame: (done: number, of: number) => void = () => {},
): Promise<ReportData> {
  const frames = rowsOf(db, "temperature", sel);
  const analyses = [...new Set(frames.map((r) => must(r, "analysis")))];
  const cooldowns: CooldownData[] = [];
  let done = 0;
  for (const analysis of analyses)
    cooldowns.push(await gatherCooldown(db, analysis, () => onFrame(++done, frames.length)));
  return { programVersion, cooldowns };
}

const rowsOf = (db: Db, table: ReportTable, sel: Selection): Row[] => {
  const found = TABLES.find((t) => t.name === table);
  if (found === undefined) throw new RangeError(`no table ${table}`);
  return [...readTable(db, found, sel)];
};

async function gatherCooldown(db: Db, analysis: number, onFrame: () => void): Promise<CooldownData> {
  const stored = readReportInfo(db, analysis);
  if (stored === null) throw new RangeError(`no analysis ${analysis}`);
  const tables = Object.fromEntries(REPORT_TABLES.map((t) => [t, rowsOf(db, t, { analysis })])) as Record<
    ReportTable,
    Row[]
  >;
  const frames: FrameData[] = [];
  // Of many frames every third, fifth … pixel is enough for a scale of colours; an odd step leaves out no column whole.
  const step = 2 * Math.floor(tables.temperature.length / 80) + 1;
  const values = new Map<ChannelName, Float32Array[]>(CHANNELS.map((c) => [c, []]));
  for (const row of tables.temperature) {
    const f = gatherFrame(db, stored, must(row, "frame"));
    for (const p of f.previews) {
      const all = valuesOf(await decodePreview({ ...p, frame: f.frame, step_x: p.stepX, step_y: p.stepY }));
      values.get(p.channel)?.push(all.filter((_, k) => k % step === 0));
    }
    frames.push(f);
    onFrame();
  }
  return { info: infoOf(db, stored), tables, scales: scalesOf(values), frames };
}

function scalesOf(values: ReadonlyMap<ChannelName, readonly Float32Array[]>): CooldownData["scales"] {
  const out: Partial<Record<ChannelName, ScaleData>> = {};
  for (const [channel, images] of values) {
    if (images.length === 0) continue;
    const { low, high, cyclic } = commonScale(channel, images);
    out[channel] = { low, high, cyclic };
  }
  return out;
}

interface Description {
  readonly photonEnergyMeV?: number | null;
  readonly filmThicknessNm?: number | null;
  readonly amplitudeUnit?: string;
  readonly frames?: readonly {
    readonly frame: number;
    readonly excluded?: string;
    readonly excludedRegions?: readonly ExcludedRegion[];
  }[];
}

function infoOf(db: Db, s: StoredReportInfo): CooldownInfo {
  const d = JSON.parse(s.description_json) as Description;
  const exclusions = (d.frames ?? []).flatMap((f): ExclusionData[] => [
    ...(f.excluded === undefined ? [] : [{ frame: f.frame, regionNm: null, reason: f.excluded }]),
    ...(f.excludedRegions ?? []).map((r): ExclusionData => ({
      frame: f.frame,
      regionNm: [r.x0Nm, r.y0Nm, r.x1Nm, r.y1Nm],
      reason: r.reason,
    })),
  ]);
  return {
    cooldown: s.cooldown,
    sample: s.sample,
    region: s.region,
    analysis: s.analysis,
    analyses: s.analyses,
    madeAt: s.made_at,
    programVersion: s.program_version,
    pixelXNm: s.pixel_x_nm,
    pixelYNm: s.pixel_y_nm,
    tipResolutionNm: s.tip_resolution_nm,
    tipResolutionSdNm: s.tip_resolution_sd_nm,
    amplitudeUnit: d.amplitudeUnit ?? "",
    photonEnergyMeV: d.photonEnergyMeV ?? null,
    filmThicknessNm: d.filmThicknessNm ?? null,
    changedSettings: defaultDifferences(JSON.parse(s.settings_json) as SettingRecord),
    notices: readNotices(db, s.analysis),
    sources: readSources(db, s.analysis),
    exclusions,
  };
}

function gatherFrame(db: Db, info: StoredReportInfo, frame: number): FrameData {
  const map = readMap(db, info.analysis, frame);
  if (map === null) throw new RangeError(`no frame ${frame} in analysis ${info.analysis}`);
  return {
    frame,
    rows: map.rows,
    cols: map.cols,
    statesDeflated: map.deflated,
    domains: domainPixels(db, info, frame, map),
    previews: readPreviews(db, info.analysis, frame).map((p) => ({
      channel: p.channel,
      rows: p.rows,
      cols: p.cols,
      stepX: p.step_x,
      stepY: p.step_y,
      low: p.low,
      high: p.high,
      image: p.image,
    })),
    walls: readWalls(db, info.analysis, frame),
    profileBins: readFrameProfileBins(db, info.analysis, frame),
    fringeBins: readFrameFringeBins(db, info.analysis, frame),
  };
}

/** Which tracked domain each pixel of a stored map belongs to. The regions are those that the analysis itself made of the map, by the same
 *  function and settings; each tracked domain must be one of them, with its stored area and place to the bit of a rounding error. Null
 *  where one is not, as after a change of the function: then the page shows the map without telling its domains apart. */
function domainPixels(
  db: Db,
  info: StoredReportInfo,
  frame: number,
  map: { rows: number; cols: number; deflated: Uint8Array },
): Uint16Array | null {
  const tracked = readAppearances(db, info.analysis, frame);
  const pixel = { xNm: info.pixel_x_nm, yNm: info.pixel_y_nm };
  const states: DomainMap = {
    rows: map.rows,
    cols: map.cols,
    pixel,
    states: new Uint8Array(inflateSync(map.deflated)),
  };
  const tip =
    info.tip_resolution_nm === null
      ? null
      : { resolutionNm: info.tip_resolution_nm, resolutionSdNm: info.tip_resolution_sd_nm ?? 0 };
  const { labels, regions } = labelDomains(states, frame, tip, storedDomainSettings(info.settings_json));
  const domainOf = new Uint16Array(regions.length + 1);
  for (const t of tracked) {
    const near = (a: number, b: number): boolean => Math.abs(a - b) <= 1e-6 * (1 + Math.abs(b));
    const g = regions.find(
      (r) => r.kind === t.kind && near(r.areaNm2, t.area_nm2) && near(r.xNm, t.x_nm) && near(r.yNm, t.y_nm),
    );
    if (g === undefined || t.domain + 1 > 0xffff) return null;
    domainOf[g.label] = t.domain + 1;
  }
  return Uint16Array.from(labels, (l) => domainOf[l]);
}

/** The settings of the domains stage as they were stored; a setting that the record does not have yet is at its default. */
function storedDomainSettings(json: string): DomainSettings {
  const record = JSON.parse(json) as SettingRecord;
  const defaults = settingsWith().domains;
  return Object.fromEntries(
    Object.entries(defaults).map(([k, v]) => [k, record[`domains.${k}`] ?? v]),
  ) as unknown as DomainSettings;
}
