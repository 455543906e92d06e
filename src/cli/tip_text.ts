import type { Cooldown, FrameInfo } from "../model/cooldown.js";
import { plainText } from "../model/text.js";
import { command } from "./called.js";
import type { CutLine, Place, TipChannel, TipMeasured, TipModel, TipSearch, Width } from "../stages/tip/index.js";

/** What was measured. */
export interface TipSubject {
  readonly cooldown: Cooldown;
  readonly info: FrameInfo;
  readonly channel: TipChannel;
  /** The YAML file as the user wrote it. */
  readonly yaml: string;
}

const MODEL_WORDS: Readonly<Record<TipModel, string>> = {
  edge: "a sharp edge",
  bar: "a long particle across the line",
  dot: "a small round particle",
};
const CHANNEL_WORDS: Readonly<Record<TipChannel, string>> = {
  amplitude: "amplitude",
  phase: "optical phase",
  topography: "topography",
  complex: "amplitude and phase together",
};

const width = (w: Width): string => `${w.nm.toFixed(1)} ± ${w.sdNm.toFixed(1)} nm`;
const place = (p: Place): string => `${Math.round(p.xNm)},${Math.round(p.yNm)}`;
const heading = (s: TipSubject): string =>
  `${plainText(s.cooldown.cooldown)}, frame ${s.info.frame} (${s.info.branch}, ${s.info.temperatureK} K), ${CHANNEL_WORDS[s.channel]}`;

/** The lines for cooldown.yaml. */
export function yamlLines(r: TipMeasured): string {
  const mark = r.status === "measured" ? "" : "   # upper limit: the particle's own size is in it";
  return `tip:\n  resolution_nm: ${r.fwhmNm.toFixed(1)}${mark}\n  resolution_sd_nm: ${r.sdNm.toFixed(1)}\n`;
}

export function measuredText(s: TipSubject, line: CutLine, r: TipMeasured): string {
  const rows: [string, string][] = [];
  if (r.status === "measured") {
    rows.push([
      "resolution (FWHM)",
      `${width({ nm: r.fwhmNm, sdNm: r.sdNm })}, 95 % interval ${r.lowNm.toFixed(1)} to ${r.highNm.toFixed(1)} nm`,
    ]);
  } else {
    rows.push([
      "resolution (FWHM)",
      `at most ${r.upper95Nm.toFixed(1)} nm (95 %); with the particle's own size fitted ${r.lowNm.toFixed(1)} to ${r.highNm.toFixed(1)} nm`,
    ]);
  }
  rows.push(["feature", `${MODEL_WORDS[r.model]} at ${place(r.at)} nm${evidenceText(r)}`]);
  if (r.model !== "edge") rows.push(["width as seen", width(r.apparent)]);
  if (r.size !== null) {
    const held =
      r.size.nm > 0 ? `${r.size.nm.toFixed(0)} nm (${r.size.lowNm.toFixed(0)} to ${r.size.highNm.toFixed(0)})` : "";
    rows.push(["its own size", held !== "" ? held : `up to ${r.size.highNm.toFixed(0)} nm`]);
  }
  if (r.directions !== null) {
    const agree = r.directions.pValue >= 0.05 ? "they agree" : "they differ";
    rows.push([
      "along, across",
      `${width(r.directions.along)}, ${width(r.directions.across)} as seen: ${agree} (p = ${r.directions.pValue.toPrecision(1)})`,
    ]);
  }
  const sides = r.sides.pValue >= 0.05 ? "they agree" : "they differ";
  rows.push([
    "near side, far side",
    `${width(r.sides.near)}, ${width(r.sides.far)}: ${sides} (p = ${r.sides.pValue.toPrecision(1)})`,
  ]);
  rows.push([
    "pixels",
    `${r.pixels} within ${(line.widthNm / 2).toFixed(0)} nm of the line; contrast ${r.contrastToNoise.toFixed(1)} × noise; reduced chi-square ${r.reducedChi2.toFixed(2)}`,
  ]);
  if (r.model !== "dot" && Math.abs(r.tiltDeg) > 1)
    rows.push(["angle", `${r.tiltDeg.toFixed(0)}° between the line and the feature's normal, allowed for`]);
  if (r.height !== null) rows.push(["height there", width(r.height)]);
  const table = rows.map(([k, v]) => `  ${k.padEnd(20)}${v}\n`).join("");
  return `${heading(s)}\nline ${place(line.from)} to ${place(line.to)} nm\n${table}\n${yamlLines(r)}`;
}

/** By how much the runner-up is worse. */
function evidenceText(r: TipMeasured): string {
  const others = (["edge", "bar", "dot"] as const)
    .filter((m) => m !== r.model && r.evidence[m] !== undefined)
    .map((m) => ({ m, by: r.evidence[m] as number }))
    .sort((a, b) => a.by - b.by);
  const next = others[0];
  return next === undefined ? "" : ` (${next.m} worse by ${next.by.toFixed(0)} in BIC)`;
}

export function measuredJson(s: TipSubject, line: CutLine, r: TipMeasured): string {
  return `${JSON.stringify({ ...subjectRecord(s), ...lineRecord(line), ...resultRecord(r) }, null, 2)}\n`;
}

const subjectRecord = (s: TipSubject): Record<string, unknown> => ({
  cooldown: s.cooldown.cooldown,
  frame: s.info.frame,
  branch: s.info.branch,
  temperature_K: s.info.temperatureK,
  channel: s.channel,
});

const lineRecord = (line: CutLine): Record<string, unknown> => ({
  from_nm: [line.from.xNm, line.from.yNm],
  to_nm: [line.to.xNm, line.to.yNm],
  line_width_nm: line.widthNm,
});

const widthRecord = (w: Width): { nm: number; sd_nm: number } => ({ nm: w.nm, sd_nm: w.sdNm });

function resultRecord(r: TipMeasured): Record<string, unknown> {
  return {
    status: r.status,
    model: r.model,
    resolution_nm: r.fwhmNm,
    resolution_sd_nm: r.sdNm,
    resolution_low_nm: r.lowNm,
    resolution_high_nm: r.highNm,
    resolution_upper95_nm: r.upper95Nm,
    apparent: widthRecord(r.apparent),
    size: r.size === null ? null : { nm: r.size.nm, low_nm: r.size.lowNm, high_nm: r.size.highNm },
    directions:
      r.directions === null
        ? null
        : {
            along: widthRecord(r.directions.along),
            across: widthRecord(r.directions.across),
            p_value: r.directions.pValue,
          },
    sides: { near: widthRecord(r.sides.near), far: widthRecord(r.sides.far), p_value: r.sides.pValue },
    x_nm: r.at.xNm,
    y_nm: r.at.yNm,
    tilt_deg: r.tiltDeg,
    contrast_to_noise: r.contrastToNoise,
    pixels: r.pixels,
    reduced_chi2: r.reducedChi2,
    evidence: r.evidence,
    height: r.height === null ? null : widthRecord(r.height),
    warnings: r.warnings,
  };
}

const REMARKS_SHOWN = new Set(["one-direction", "correlated-noise", "size-not-separable"]);

export function searchText(s: TipSubject, search: TipSearch): string {
  if (search.candidates.length === 0)
    return `${heading(s)}\nnothing sharp enough stands out of the noise (${search.tried} places tried)\n`;
  const lines = search.candidates.map((c, k) => {
    const r = c.result;
    const remarks = r.warnings.map((w) => w.code).filter((w) => !REMARKS_SHOWN.has(w));
    const fwhm = `${r.status === "measured" ? " " : "<"}${r.fwhmNm.toFixed(1)} ± ${r.sdNm.toFixed(1)}`;
    return (
      `${String(k + 1).padStart(3)}  ${place(c.line.from).padStart(10)}  ${place(c.line.to).padStart(10)}  ${r.model.padEnd(4)}` +
      `${fwhm.padStart(14)}${r.upper95Nm.toFixed(1).padStart(9)}${r.contrastToNoise.toFixed(1).padStart(7)}  ${c.sound ? "" : "! "}${remarks.join(", ")}`
    );
  });
  const best = search.candidates[0];
  const t = search.together;
  const together =
    t === null
      ? ""
      : `\n${t.features} features that agree with the sharpest, one tip under all of them: ${width({ nm: t.nm, sdNm: t.sdNm })}, ` +
        `95 % interval ${t.lowNm.toFixed(1)} to ${t.highNm.toFixed(1)} nm\n`;
  return (
    `${heading(s)}: sharpest features first, ${search.tried} places tried\n` +
    `  #     from/nm       to/nm  what      FWHM / nm  95%below  c/n  remarks\n${lines.join("\n")}\n` +
    "`<`: upper limit, a particle's own size is in it; `!`: the width is in doubt\n" +
    together +
    `measure one: ${command("tip", s.yaml)} --frame ${s.info.frame} --channel ${s.channel} ` +
    `--from ${place(best.line.from)} --to ${place(best.line.to)}\n` +
    (t === null ? "" : `\ntip:\n  resolution_nm: ${t.nm.toFixed(1)}\n  resolution_sd_nm: ${t.sdNm.toFixed(1)}\n`)
  );
}

export function searchJson(s: TipSubject, search: TipSearch): string {
  const candidates = search.candidates.map((c) => ({
    ...lineRecord(c.line),
    sound: c.sound,
    ...resultRecord(c.result),
  }));
  const t = search.together;
  return `${JSON.stringify(
    {
      ...subjectRecord(s),
      tried: search.tried,
      together:
        t === null
          ? null
          : {
              resolution_nm: t.nm,
              resolution_sd_nm: t.sdNm,
              resolution_low_nm: t.lowNm,
              resolution_high_nm: t.highNm,
              features: t.features,
            },
      candidates,
    },
    null,
    2,
  )}\n`;
}

/** What the resolution that cooldown.yaml states has to say about this one. */
export function statedRemark(cooldown: Cooldown, r: TipMeasured): string | null {
  const stated = cooldown.tip;
  if (stated === null) return null;
  const sd = Math.hypot(stated.resolutionSdNm, r.sdNm);
  const text = `${stated.resolutionNm} nm in cooldown.yaml`;
  if (r.status === "measured" && r.fwhmNm < stated.resolutionNm - 3 * sd)
    return `sharper than the ${text}: with that value walls come out too narrow`;
  if (r.fwhmNm > stated.resolutionNm + 3 * sd)
    return `wider than the ${text}: this feature is not sharp, or the tip was blunter in this frame`;
  return null;
}
