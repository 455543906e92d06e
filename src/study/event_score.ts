import { mergeSpec, simulateCooldown, type CooldownSpec } from "../demo/index.js";
import type { Analysis } from "../model/analysis.js";
import type { FrameDomains } from "../model/domains.js";
import { dataOf } from "../model/raster.js";
import { INSULATING, METALLIC, NO_STATE } from "../model/signal.js";
import type { Settings } from "../settings.js";
import { labelDomains } from "../stages/domains/index.js";
import { unpackMap } from "../workers/measure_task.js";
import { answered, eventsBetween, eventsOf, type DomainEvent } from "./domain_events.js";

/** Births, deaths, splits and merges of large domains: how many there were and were found, how many were told and were right. */
export interface EventScore {
  readonly known: number;
  readonly found: number;
  readonly told: number;
  readonly right: number;
}

/** An event this near to the edge of what both frames show is not asked about, px. */
const EDGE_PX = 3;
/** … nor one of whose pixels more than this share has no state in either frame (debris, rows not measured). */
const MOST_HIDDEN = 0.2;

/** Events told by the histories, against those of noise-free maps of the sample at the same temperatures: what
 *  the tip sees, divided half-way between the levels.
 *  Asked about are domains of at least 20 pixels and two areas of the tip. */
export function scoreEvents(spec: CooldownSpec, analysis: Analysis, settings: Settings): EventScore {
  const { plan } = simulateCooldown(spec);
  const { rows, cols, pixel } = spec;
  const { tip } = analysis.cooldown;
  const steps = plan.map((p) => ({
    rows: Math.round(p.driftYNm / pixel.yNm),
    cols: Math.round(p.driftXNm / pixel.xNm),
  }));
  const margin = EDGE_PX + Math.max(...steps.flatMap((s) => [Math.abs(s.rows), Math.abs(s.cols)]));
  const shifts = steps.map((s) => ({ rows: s.rows + margin, cols: s.cols + margin }));
  const wide = { rows: rows + 2 * margin, cols: cols + 2 * margin };

  // frame k without noise, debris or fringe, as the tip sees it, on a grid that holds every field of view
  const quiet = simulateCooldown(
    mergeSpec(spec, {
      ...wide,
      origin: { xNm: spec.origin.xNm - margin * pixel.xNm, yNm: spec.origin.yNm - margin * pixel.yNm },
      drift: { listNm: plan.map(() => [0, 0] as const) },
      fringe: { amplitudeRad: 0 },
      gain: { frameSd: 0, rowSd: 0, rowWalkSd: 0 },
      phaseOffset: { rowSdRad: 0, rowWalkSdRad: 0, anyPhase: false },
      noise: { complex: 0, amplitude: 0, phaseRad: 0 },
      debris: { perUm2: 0 },
      scars: { perFrame: 0 },
      unmeasured: { chance: 0 },
    }),
  );
  const truthAt = (k: number): FrameDomains => {
    const { amplitude, phase, truth } = quiet.frame(k);
    const a = dataOf(amplitude);
    const f = dataOf(phase);
    const { amplitudeInsulating, amplitudeMetallic, phaseInsulatingRad, phaseMetallicRad } = truth.levels;
    const re0 = amplitudeInsulating * Math.cos(phaseInsulatingRad);
    const im0 = amplitudeInsulating * Math.sin(phaseInsulatingRad);
    const dr = amplitudeMetallic * Math.cos(phaseMetallicRad) - re0;
    const di = amplitudeMetallic * Math.sin(phaseMetallicRad) - im0;
    const states = Uint8Array.from(a, (m, p) => {
      const share = ((m * Math.cos(f[p]) - re0) * dr + (m * Math.sin(f[p]) - im0) * di) / (dr * dr + di * di);
      return share > 0.5 ? METALLIC : INSULATING;
    });
    return labelDomains({ ...wide, pixel, states }, k, tip, settings.domains);
  };
  const seen = analysis.frames.map((f, k) => labelDomains(unpackMap(f.map, pixel), k, tip, settings.domains));
  const tipAreaNm2 = Math.PI * (spec.tip.resolutionNm / 2) ** 2;
  const leastPx = Math.max(20, (2 * tipAreaNm2) / (pixel.xNm * pixel.yNm));

  const known: DomainEvent[] = [];
  let before = truthAt(0);
  for (let k = 1; k < plan.length; k++) {
    const now = truthAt(k);
    known.push(...eventsBetween(before, now, k, leastPx));
    before = now;
  }
  const found = eventsOf(analysis.domains, seen, shifts, leastPx);

  const stateIn = (k: number, row: number, col: number): number => {
    const i = row - shifts[k].rows;
    const j = col - shifts[k].cols;
    if (i < EDGE_PX || j < EDGE_PX || i >= rows - EDGE_PX || j >= cols - EDGE_PX) return -1;
    return seen[k].map.states[i * cols + j];
  };
  const visible = (e: DomainEvent): boolean => {
    const hidden = [0, 0];
    for (const key of e.pixels) {
      const row = Math.floor(key / 100000) - 1000;
      const col = (key % 100000) - 1000;
      for (const n of [0, 1]) {
        const state = stateIn(e.frame - n, row, col);
        if (state < 0) return false;
        if (state === NO_STATE) hidden[n]++;
      }
    }
    return Math.max(...hidden) <= MOST_HIDDEN * e.pixels.size;
  };
  const sum = (counts: Record<string, { all: number; found: number }>): { all: number; found: number } =>
    Object.values(counts).reduce((t, c) => ({ all: t.all + c.all, found: t.found + c.found }), { all: 0, found: 0 });
  const recall = sum(answered(known.filter(visible), found).counts);
  const precision = sum(answered(found.filter(visible), known).counts);
  return { known: recall.all, found: recall.found, told: precision.all, right: precision.found };
}
