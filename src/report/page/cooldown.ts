import { must, num, word, type Row } from "../../figures/rows.js";
import { decodeTable } from "../codec.js";
import { REPORT_TABLES, type CooldownInfo, type ReportTable } from "../data.js";
import type { CooldownIndex, FrameHead, ReportIndex } from "../index_data.js";

export function readIndex(): ReportIndex {
  return JSON.parse(document.getElementById("index")?.textContent ?? "") as ReportIndex;
}

export function chunk(n: number): Uint8Array<ArrayBuffer> {
  const text = atob(document.getElementById(`chunk-${n}`)?.textContent ?? "");
  const out = new Uint8Array(text.length);
  for (let k = 0; k < text.length; k++) out[k] = text.charCodeAt(k);
  return out;
}

/** Undoes node:zlib's deflate. */
export async function inflate(bytes: Uint8Array<ArrayBuffer>): Promise<Uint8Array<ArrayBuffer>> {
  const stream = new Blob([bytes]).stream().pipeThrough(new DecompressionStream("deflate"));
  return new Uint8Array(await new Response(stream).arrayBuffer());
}

/** One cooldown with its tables in hand and by what they are asked for. */
export class Cooldown {
  private constructor(
    readonly index: CooldownIndex,
    readonly tables: Readonly<Record<ReportTable, readonly Row[]>>,
    /** By frame. */
    readonly frameRows: readonly Row[],
    readonly profilesOf: ReadonlyMap<number, readonly Row[]>,
    readonly fringesOf: ReadonlyMap<number, readonly Row[]>,
    readonly appearancesOf: ReadonlyMap<number, readonly Row[]>,
    readonly domainsIn: ReadonlyMap<number, readonly Row[]>,
  ) {}

  static async load(index: CooldownIndex): Promise<Cooldown> {
    const tables = {} as Record<ReportTable, Row[]>;
    for (const name of REPORT_TABLES) {
      const { head, chunk: n } = index.tables[name];
      tables[name] = decodeTable(head, await inflate(chunk(n)));
    }
    const frameRows = [...tables.temperature].sort((a, b) => must(a, "frame") - must(b, "frame"));
    // Columns that say the same in every row of a cooldown or of a frame are not in the page twice.
    const { cooldown, tipResolutionNm } = index.info;
    const ofFrame = (r: Row): Row => {
      const f = frameRows[must(r, "frame")];
      const { branch, cycle, temperature_K } = f as Record<string, string | number | null>;
      return { cooldown, branch: branch ?? null, cycle: cycle ?? null, temperature_K: temperature_K ?? null, ...r };
    };
    const walls = tables.walls.map((r) => ({ ...ofFrame(r), tip_resolution_nm: tipResolutionNm }));
    const fringes = tables.fringes.map(ofFrame);
    const appearances = tables["domain-frames"].map(ofFrame);
    const domains = tables.domains.map((r) => ({ cooldown, ...r }));
    return new Cooldown(
      index,
      { ...tables, walls, fringes, domains, "domain-frames": appearances },
      frameRows,
      groupedBy(walls, "frame"),
      groupedBy(fringes, "frame"),
      groupedBy(appearances, "domain"),
      groupedBy(appearances, "frame"),
    );
  }

  get info(): CooldownInfo {
    return this.index.info;
  }

  frameRow(frame: number): Row {
    return this.frameRows[frame] ?? {};
  }

  head(frame: number): FrameHead {
    return this.index.frames[frame];
  }

  profile(frame: number, wall: number, profile: number): Row | null {
    return this.profilesOf.get(frame)?.find((r) => must(r, "wall") === wall && must(r, "profile") === profile) ?? null;
  }

  /** The tested stretch of a wall that holds a place along it. */
  fringeAt(frame: number, wall: number, arcNm: number): Row | null {
    return (
      this.fringesOf
        .get(frame)
        ?.find((r) => must(r, "wall") === wall && must(r, "arc_from_nm") <= arcNm && arcNm <= must(r, "arc_to_nm")) ??
      null
    );
  }

  domain(domain: number): Row | null {
    return this.tables.domains.find((r) => must(r, "domain") === domain) ?? null;
  }

  /** Where a frame lies, nm of the cooldown; null where it was not placed. */
  drift(frame: number): { xNm: number; yNm: number } | null {
    const r = this.frameRow(frame);
    const [xNm, yNm] = [num(r, "drift_x_nm"), num(r, "drift_y_nm")];
    return xNm === null || yNm === null ? null : { xNm, yNm };
  }

  /** The frame of the other branch whose temperature is nearest, of the same cycle where that has one. */
  opposite(frame: number): number | null {
    const r = this.frameRow(frame);
    const others = this.frameRows.filter((o) => word(o, "branch") !== word(r, "branch"));
    const own = others.filter((o) => must(o, "cycle") === must(r, "cycle"));
    const t = must(r, "temperature_K");
    const off = (o: Row): number => Math.abs(must(o, "temperature_K") - t);
    const best = (own.length > 0 ? own : others).reduce<Row | null>(
      (a, b) => (a === null || off(b) < off(a) ? b : a),
      null,
    );
    return best === null ? null : must(best, "frame");
  }
}

function groupedBy(rows: readonly Row[], column: string): Map<number, Row[]> {
  const out = new Map<number, Row[]>();
  for (const r of rows) {
    const key = must(r, column);
    const list = out.get(key);
    if (list === undefined) out.set(key, [r]);
    else list.push(r);
  }
  return out;
}
