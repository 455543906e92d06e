import type { FrameInfo } from "../../../src/model/cooldown.js";
import { defaultsOf } from "../../../src/model/settings.js";
import type { FrameLevels, FrameStates, Signal } from "../../../src/model/signal.js";
import { defaultSpec, simulateCooldown, type SimulatedTruth, type SpecOverrides } from "../../../src/demo/index.js";
import { cleanFrame, cleanSettings } from "../../../src/stages/clean/index.js";
import { DebrisAccumulator, debrisInFrame, debrisSettings } from "../../../src/stages/debris/index.js";
import { fitLevels, mapStates, settings, trackLevels } from "../../../src/stages/states/index.js";

export interface AnalysedFrame {
  readonly truth: SimulatedTruth;
  readonly levels: FrameLevels;
  readonly signal: Signal;
  readonly states: FrameStates;
  /** Metallic share of the noise-free map over the pixels that the analysis used. */
  readonly trueFraction: number;
}

/** A simulated cooldown through cleaning, debris (at the true drift) and states. */
export function analyse(overrides: SpecOverrides, withPhase = true): AnalysedFrame[] {
  const spec = defaultSpec(overrides);
  const simulated = simulateCooldown(spec);
  const tip = { resolutionNm: spec.tip.statedNm, resolutionSdNm: spec.tip.statedSdNm };
  const s = defaultsOf(settings);
  const raw = simulated.plan.map((p) => simulated.frame(p.frame));
  const clean = raw.map((f) => cleanFrame(withPhase ? f : { ...f, phase: null }, defaultsOf(cleanSettings)).clean);
  const drifts = simulated.plan.map((p) => ({ frame: p.frame, xNm: p.driftXNm, yNm: p.driftYNm, sdNm: 0 }));
  const accumulator = new DebrisAccumulator(drifts, tip, defaultsOf(debrisSettings));
  clean.forEach((c, k) => accumulator.accumulate(c, drifts[k]));
  const debrisMap = accumulator.finish();
  const debris = drifts.map((d) => debrisInFrame(debrisMap, d, spec.rows, spec.cols));
  const infos = simulated.plan.map((p): FrameInfo => ({
    frame: p.frame,
    series: p.series,
    branch: p.branch,
    cycle: p.cycle,
    temperatureK: p.temperatureK,
    startedAt: null,
    endedAt: null,
    stageXNm: null,
    stageYNm: null,
    rows: spec.rows,
    cols: spec.cols,
    sources: { amplitude: { file: "", label: "", format: "tiff", page: p.frame, scale: 1 } },
  }));
  const fits = clean.map((c, k) => fitLevels(c, debris[k], tip, s));
  const { levels } = trackLevels(fits, infos, s);
  return clean.map((c, k) => {
    const { signal, states } = mapStates(c, debris[k], fits[k], levels[k], tip, s);
    let [used, metallic] = [0, 0];
    states.map.states.forEach((v, p) => {
      if (v === 255) return;
      used++;
      metallic += raw[k].truth.states[p];
    });
    return { truth: raw[k].truth, levels: levels[k], signal, states, trueFraction: metallic / used };
  });
}
