import { deflateSync } from "node:zlib";
import { TABLES } from "../tables/columns.js";
import { encodeTable } from "./codec.js";
import { REPORT_TABLES, type CooldownData, type FrameData, type ReportData, type ReportTable } from "./data.js";
import { encodeFringes, encodeProfiles, encodeWalls } from "./frame_codec.js";
import type { ChunkNumber, CooldownIndex, FrameHead, ReportIndex } from "./index_data.js";

/** The data of a page, ready to be written into it: an index, and chunks of base64. */
export interface PackedReport {
  readonly index: ReportIndex;
  readonly chunks: readonly string[];
}

/** Columns that say the same in every row of a cooldown, or that the row of the frame says. */
const SAID_ELSEWHERE: Readonly<Partial<Record<ReportTable, readonly string[]>>> = {
  walls: ["cooldown", "branch", "cycle", "temperature_K", "tip_resolution_nm", "analysis"],
  fringes: ["cooldown", "branch", "cycle", "temperature_K", "analysis"],
  "domain-frames": ["cooldown", "temperature_K", "analysis"],
  domains: ["cooldown", "analysis"],
};

/** Tables whose numbers keep all their digits; the long ones have seven. */
const WIDE: readonly ReportTable[] = ["temperature", "loops"];

export function packReport(data: ReportData): PackedReport {
  const chunks: string[] = [];
  const keep = (bytes: Uint8Array): ChunkNumber =>
    chunks.push(Buffer.from(bytes.buffer, bytes.byteOffset, bytes.byteLength).toString("base64")) - 1;
  const cooldowns = data.cooldowns.map((c) => packCooldown(c, keep));
  return { index: { programVersion: data.programVersion, cooldowns }, chunks };
}

const deflated = (bytes: Uint8Array): Uint8Array => deflateSync(bytes, { level: 9 });

function packCooldown(c: CooldownData, keep: (bytes: Uint8Array) => ChunkNumber): CooldownIndex {
  const table = (name: ReportTable): CooldownIndex["tables"][ReportTable] => {
    const leave = SAID_ELSEWHERE[name] ?? [];
    const columns = TABLES.find((t) => t.name === name)?.columns.map((k) => k.name) ?? [];
    const { head, bytes } = encodeTable(
      c.tables[name],
      columns.filter((k) => !leave.includes(k)),
      WIDE.includes(name),
    );
    return { head, chunk: keep(deflated(bytes)) };
  };
  return {
    info: c.info,
    tables: Object.fromEntries(REPORT_TABLES.map((name) => [name, table(name)])) as CooldownIndex["tables"],
    scales: c.scales,
    frames: c.frames.map((f) => packFrame(f, keep)),
  };
}

function packFrame(f: FrameData, keep: (bytes: Uint8Array) => ChunkNumber): FrameHead {
  return {
    frame: f.frame,
    rows: f.rows,
    cols: f.cols,
    states: keep(f.statesDeflated),
    domains: f.domains === null ? null : keep(deflated(littleEndian(f.domains))),
    previews: f.previews.map(({ image, ...p }) => ({ ...p, chunk: keep(image) })),
    walls: keep(deflated(encodeWalls(f.walls))),
    profileBins: keep(deflated(encodeProfiles(f.profileBins))),
    fringeBins: keep(deflated(encodeFringes(f.fringeBins))),
  };
}

function littleEndian(values: Uint16Array): Uint8Array {
  const out = new Uint8Array(2 * values.length);
  values.forEach((v, k) => {
    out[2 * k] = v & 255;
    out[2 * k + 1] = v >> 8;
  });
  return out;
}
