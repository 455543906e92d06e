import type { CooldownTruth, FrameTruth } from "../demo/index.js";
import { tableNamed, type ExportedTable } from "../tables/columns.js";
import { readTable, type Cell, type Row } from "../store/read.js";
import type { Db } from "../store/open.js";
import type { EventScore } from "./event_score.js";

/** One estimate beside its truth. `sd` or the interval is what the program claims of it. */
export interface Estimate {
  readonly error: number;
  readonly sd: number | null;
  readonly covered: boolean | null;
}

/** How far the exported tables of one cooldown are from its truth. */
export interface Score {
  /** Error of each axis in pixels of that axis, with the claimed sd in pixels; the reference frame left out. */
  readonly driftPx: readonly Estimate[];
  readonly framesNotPlaced: number;
  /** Against the truth of the measured field, what lies under debris included. */
  readonly fraction: readonly Estimate[];
  /** The same of frames of both states only: theirs is an interval, that of one state a limit. */
  readonly mixedFraction: readonly Estimate[];
  readonly framesUndecided: number;
  readonly singleStateFrames: number;
  /** Among frames of one state: those whose fraction is not exactly 0 or 1, and profiles found in them. */
  readonly singleStateWrong: number;
  readonly singleStateProfiles: number;
  /** Half temperatures and loop widths, K; covered by their interval or not. */
  readonly halfK: readonly Estimate[];
  readonly widthK: readonly Estimate[];
  /** Largest gap between neighbouring temperatures next to a half temperature, K. */
  readonly stepK: number;
  /** Relative error of each frame's median wall width, in frames with at least `LEAST_PROFILES` profiles. */
  readonly medianWidth: readonly Estimate[];
  /** Of sound resolved profiles: (width − truth)/truth, with sd relative to the truth. */
  readonly profileWidth: readonly Estimate[];
  readonly profiles: number;
  readonly flagged: number;
  readonly unresolved: number;
  /** Sound profiles whose upper limit lies above the truth. */
  readonly upperHolds: number;
  readonly wallLength: readonly Estimate[];
  readonly fringesTested: number;
  readonly fringesDetected: number;
  readonly fringesWrongSide: number;
  /** Relative errors where reported. */
  readonly period: readonly Estimate[];
  readonly decay: readonly Estimate[];
  /** Births, deaths, splits and merges; null where nobody asked. */
  readonly events: EventScore | null;
}

const LEAST_PROFILES = 5;

const value = (c: Cell | undefined): number | null => (typeof c === "number" ? c : null);

function estimate(
  found: number | null,
  truth: number | null,
  low: number | null,
  high: number | null,
  scale = 1,
): Estimate[] {
  if (found === null || truth === null) return [];
  const covered = low === null || high === null ? null : low <= truth + 1e-9 && truth <= high + 1e-9;
  return [{ error: (found - truth) / scale, sd: null, covered }];
}

const withSd = (found: number | null, truth: number, sd: number | null, scale: number): Estimate[] =>
  found === null ? [] : [{ error: (found - truth) / scale, sd: sd === null ? null : sd / scale, covered: null }];

/** What only the simulator knows, or only the analysis in memory. */
export interface Beside {
  /** True metallic fractions of the whole measured field, what lies under debris included, one a frame. */
  readonly fractions: readonly (number | null)[];
  readonly events: EventScore;
}

/** Reads the tables of the truth's cooldown back from the database and sets them beside the truth; see `scoreTables`. */
export function scoreCooldown(db: Db, truth: CooldownTruth, beside?: Beside): Score {
  return scoreTables(
    (name) => [...readTable(db, tableNamed(name) as ExportedTable, { cooldowns: [truth.cooldown] })],
    truth,
    beside,
  );
}

/** Sets exported tables, wherever they come from, beside the truth of their cooldown.
 *  @param rows the rows of a table by its name
 *  @param beside without it the fraction is compared over the pixels that the simulator holds free of debris, and events are not scored */
export function scoreTables(rows: (name: string) => readonly Row[], truth: CooldownTruth, beside?: Beside): Score {
  const frames = rows("temperature");
  const truthOf = (r: Row): FrameTruth => truth.frames[r["frame"] as number] as FrameTruth;
  const { xNm, yNm } = truth.spec.pixel;
  const later = frames.filter((r) => r["frame"] !== 0);
  const single = frames.filter((r) => truthOf(r).singleState !== null);
  const walls = rows("walls");
  const sound = walls.filter((r) => r["flag"] === "" && truthOf(r).singleState === null);
  const loops = rows("loops");
  const fringes = rows("fringes").filter((r) => truthOf(r).singleState === null);
  const detected = fringes.filter((r) => r["detected"] === 1);
  const side = truth.spec.fringe.side;
  const fractionOf = (r: Row): Estimate[] =>
    estimate(
      value(r["metallic_fraction"]),
      beside === undefined ? truthOf(r).metallicFractionClean : (beside.fractions[r["frame"] as number] ?? null),
      value(r["metallic_fraction_low"]),
      value(r["metallic_fraction_high"]),
    );

  return {
    events: beside?.events ?? null,
    driftPx: later.flatMap((r) => {
      const sd = value(r["drift_sd_nm"]);
      return [
        ...withSd(value(r["drift_x_nm"]), truthOf(r).driftXNm, sd, xNm),
        ...withSd(value(r["drift_y_nm"]), truthOf(r).driftYNm, sd, yNm),
      ];
    }),
    framesNotPlaced: frames.filter((r) => r["drift_x_nm"] === null).length,
    fraction: frames.flatMap(fractionOf),
    mixedFraction: frames.filter((r) => truthOf(r).singleState === null).flatMap(fractionOf),
    framesUndecided: frames.filter((r) => r["metallic_fraction"] === null).length,
    singleStateFrames: single.length,
    singleStateWrong: single.filter((r) => r["metallic_fraction"] !== (truthOf(r).singleState === "metallic" ? 1 : 0))
      .length,
    singleStateProfiles: walls.filter((r) => truthOf(r).singleState !== null).length,
    halfK: loops.flatMap((l) => {
      const t = truth.cycles.find((c) => c.cycle === l["cycle"]);
      return (["cooling", "warming"] as const).flatMap((b) =>
        estimate(
          value(l[`${b}_half_K`]),
          (b === "cooling" ? t?.coolingHalfK : t?.warmingHalfK) ?? null,
          value(l[`${b}_half_low_K`]),
          value(l[`${b}_half_high_K`]),
        ),
      );
    }),
    widthK: loops.flatMap((l) =>
      estimate(
        value(l["width_K"]),
        truth.cycles.find((c) => c.cycle === l["cycle"])?.widthK ?? null,
        value(l["width_low_K"]),
        value(l["width_high_K"]),
      ),
    ),
    stepK: stepAtHalf(truth),
    medianWidth: frames
      .filter(
        (r) =>
          truthOf(r).singleState === null && truthOf(r).widthNm > 0 && (value(r["profiles"]) ?? 0) >= LEAST_PROFILES,
      )
      .flatMap((r) =>
        estimate(
          value(r["wall_width_median_nm"]),
          truthOf(r).widthNm,
          value(r["wall_width_median_low_nm"]),
          value(r["wall_width_median_high_nm"]),
          truthOf(r).widthNm,
        ),
      ),
    profileWidth: sound
      .filter((r) => r["resolved"] === 1 && truthOf(r).widthNm > 0)
      .flatMap((r) => withSd(value(r["width_nm"]), truthOf(r).widthNm, value(r["width_sd_nm"]), truthOf(r).widthNm)),
    profiles: walls.length,
    flagged: walls.filter((r) => r["flag"] !== "").length,
    unresolved: sound.filter((r) => r["resolved"] === 0).length,
    upperHolds: sound.filter((r) => (value(r["width_upper95_nm"]) ?? -1) >= truthOf(r).widthNm).length,
    wallLength: frames
      .filter((r) => truthOf(r).wallLengthCleanNm > truth.spec.cols * xNm)
      .flatMap((r) =>
        estimate(value(r["wall_length_nm"]), truthOf(r).wallLengthCleanNm, null, null, truthOf(r).wallLengthCleanNm),
      ),
    fringesTested: fringes.length,
    fringesDetected: detected.length,
    fringesWrongSide: detected.filter((r) => r["side"] !== side).length,
    period: detected.flatMap((r) =>
      withSd(value(r["period_nm"]), truth.spec.fringe.periodNm, value(r["period_sd_nm"]), truth.spec.fringe.periodNm),
    ),
    decay: detected.flatMap((r) =>
      withSd(value(r["decay_nm"]), truth.spec.fringe.decayNm, value(r["decay_sd_nm"]), truth.spec.fringe.decayNm),
    ),
  };
}

/** The widest of the temperature steps that hold a true half temperature. */
function stepAtHalf(truth: CooldownTruth): number {
  let widest = 0;
  for (const c of truth.cycles)
    for (const branch of ["cooling", "warming"] as const) {
      const half = branch === "cooling" ? c.coolingHalfK : c.warmingHalfK;
      if (half === null) continue;
      const t = truth.frames
        .filter((f) => f.cycle === c.cycle && f.branch === branch)
        .map((f) => f.temperatureK)
        .sort((a, b) => a - b);
      for (let k = 1; k < t.length; k++)
        if ((t[k - 1] as number) <= half && half <= (t[k] as number))
          widest = Math.max(widest, (t[k] as number) - (t[k - 1] as number));
    }
  return widest;
}

export const largest = (e: readonly Estimate[]): number => e.reduce((m, v) => Math.max(m, Math.abs(v.error)), 0);
export const rms = (v: readonly number[]): number =>
  Math.sqrt(v.reduce((s, x) => s + x * x, 0) / Math.max(1, v.length));
export const errorsOf = (e: readonly Estimate[]): number[] => e.map((v) => v.error);
