import type { Branch } from "../model/cooldown.js";
import type { PixelSize } from "../model/raster.js";

/** A particle lying on the sample: a dot where `lengthNm` is 0, else a rod with round ends. Sample coordinates. */
export interface Particle {
  readonly xNm: number;
  readonly yNm: number;
  readonly radiusNm: number;
  readonly lengthNm: number;
  readonly angleDeg: number;
  readonly heightNm: number;
  /** What the particle multiplies the near-field amplitude by. */
  readonly amplitudeFactor: number;
  readonly phaseShiftRad: number;
}

export interface SeriesSpec {
  readonly branch: Branch;
  readonly temperaturesK: readonly number[];
}

/** Everything that a simulated cooldown is made from. Plain data; the same spec gives the same numbers on every machine. */
export interface CooldownSpec {
  readonly sample: string;
  readonly cooldown: string;
  readonly region: string;
  /** Noise, gain, drift, scars, unmeasured rows and the cooldown's own share of the domains. */
  readonly seed: number;
  /** Topography, debris and the share of the domains that comes back in every cooldown of the sample. */
  readonly sampleSeed: number;
  readonly rows: number;
  readonly cols: number;
  readonly pixel: PixelSize;
  readonly series: readonly SeriesSpec[];
  /** Where the first frame's pixel (0, 0) lies in sample coordinates, nm. */
  readonly origin: { readonly xNm: number; readonly yNm: number };
  /** `resolutionNm` (full width at half maximum, Gaussian) blurs; `statedNm` and `statedSdNm` are what cooldown.yaml says. */
  readonly tip: { readonly resolutionNm: number; readonly statedNm: number; readonly statedSdNm: number };
  /** A point of the sample turns metallic above half − spreadK·F, where F is the domains' field (mean 0, sd 1 when random). */
  readonly transition: { readonly coolingHalfK: number; readonly warmingHalfK: number; readonly spreadK: number };
  readonly domains: {
    /** `random`: Gaussian random field. `line`, `stripe`, `disc`: F is the signed distance over `scaleNm`; for tests. */
    readonly shape: "random" | "line" | "stripe" | "disc";
    /** Random: the field's correlation is exp(−r²/(4·scaleNm²)); mean gap between walls on a line 4.4·scaleNm at half. */
    readonly scaleNm: number;
    /** Share (correlation) of the field that belongs to the sample, the same in every cooldown. */
    readonly memory: number;
    /** Of the rest, the share (correlation) common to both branches and all cycles of one cooldown. */
    readonly branchMemory: number;
    /** Other shapes, sample coordinates: a point of the line, the middle of the stripe or disc. */
    readonly xNm: number;
    readonly yNm: number;
    /** Line and stripe: direction of the metallic side's normal as in the `walls` table (anticlockwise, y up the page). */
    readonly normalDeg: number;
    /** Disc: its radius; stripe: half of its width. The inside is metallic. */
    readonly halfWidthNm: number;
  };
  /** 10–90 % rise of the intrinsic profile ½(1 + tanh(d/w)), w·ln 9, at `coolingHalfK`, and its change with temperature. */
  readonly wall: { readonly widthNm: number; readonly slopeNmPerK: number };
  /** Factor exp(i·A·cos(2πd/Λ + ψ)·e^{−d/ℓ}) on the named side, d the distance from the wall; amplitudeRad 0: none. */
  readonly fringe: {
    readonly side: "metallic" | "insulating";
    readonly amplitudeRad: number;
    readonly periodNm: number;
    readonly decayNm: number;
    readonly phaseRad: number;
  };
  /** Levels of the two states at `coolingHalfK` in the scale of the first frame, and the amplitudes' relative change per kelvin. */
  readonly levels: {
    readonly amplitudeInsulating: number;
    readonly amplitudeMetallic: number;
    readonly phaseInsulatingRad: number;
    readonly phaseMetallicRad: number;
    readonly insulatingSlopePerK: number;
    readonly metallicSlopePerK: number;
  };
  /** Standard deviations of log gain: frame to frame (the first frame has gain 1), row to row, and of each row's random-walk step. */
  readonly gain: { readonly frameSd: number; readonly rowSd: number; readonly rowWalkSd: number };
  /** Offset of the optical phase: row to row and random-walk step, rad; and whether each frame starts at a phase of its own. */
  readonly phaseOffset: { readonly rowSdRad: number; readonly rowWalkSdRad: number; readonly anyPhase: boolean };
  readonly noise: {
    /** Per component of the complex signal, in the unit of the levels. */
    readonly complex: number;
    /** Added to the amplitude alone and to the phase alone. */
    readonly amplitude: number;
    readonly phaseRad: number;
    /** Standard deviation of the Gaussian that noise is smoothed with along each axis (0: white); its variance is kept. */
    readonly correlationXPx: number;
    readonly correlationYPx: number;
  };
  readonly topography: {
    /** Fine roughness and slow waviness: rms height, and the scale c of the correlation exp(−r²/(4c²)). */
    readonly roughnessNm: number;
    readonly roughnessScaleNm: number;
    readonly wavinessNm: number;
    readonly wavinessScaleNm: number;
    /** Largest slope of the tilt along each axis, drawn anew for each frame. */
    readonly tiltNmPerUm: number;
    readonly rowSdNm: number;
    readonly rowWalkSdNm: number;
    readonly noiseNm: number;
  };
  /** Random walk with jumps, folded back at ±limitNm; or `listNm`: one [x, y] a frame, the first of them [0, 0]. */
  readonly drift: {
    readonly stepSdNm: number;
    readonly jumpChance: number;
    readonly jumpNm: number;
    readonly limitNm: number;
    readonly listNm: readonly (readonly [number, number])[] | null;
  };
  /** Particles a µm² at random places; or a list of them. */
  readonly debris: { readonly perUm2: number; readonly list: readonly Particle[] | null };
  /** Mean number a frame of scars: runs along a row in which the tip slipped. */
  readonly scars: { readonly perFrame: number; readonly maxLengthPx: number };
  /** Chance a frame that a block of rows was not measured; or the blocks themselves (rows from `fromRow` to before `toRow`). */
  readonly unmeasured: {
    readonly chance: number;
    readonly maxRows: number;
    readonly list: readonly { readonly frame: number; readonly fromRow: number; readonly toRow: number }[] | null;
  };
}

/** Any part of a spec; the parts of a group that are left out keep their default. */
export type SpecOverrides = {
  readonly [K in keyof CooldownSpec]?: CooldownSpec[K] extends string | number | readonly unknown[]
    ? CooldownSpec[K]
    : Partial<CooldownSpec[K]>;
};

const COOLING_K = [190, 176, 168, 163, 159, 155.5, 152, 148.5, 145, 140, 132, 120];

/** A made-up film near 150 K: 192 × 192 pixels of 10 nm, 2 × 12 temperatures, a 30 nm tip, walls 100 nm wide, no fringe. */
const DEFAULT: CooldownSpec = {
  sample: "KV-00",
  cooldown: "kv00-run1",
  region: "A",
  seed: 1,
  sampleSeed: 1,
  rows: 192,
  cols: 192,
  pixel: { xNm: 10, yNm: 10 },
  series: [
    { branch: "cooling", temperaturesK: COOLING_K },
    { branch: "warming", temperaturesK: [122, 136, 146, 151, 155, 158.5, 162, 165.5, 169, 174, 182, 192] },
  ],
  origin: { xNm: 0, yNm: 0 },
  tip: { resolutionNm: 30, statedNm: 30, statedSdNm: 1 },
  transition: { coolingHalfK: 153, warmingHalfK: 161, spreadK: 5 },
  domains: {
    shape: "random",
    scaleNm: 170,
    memory: 0.7,
    branchMemory: 0.8,
    xNm: 0,
    yNm: 0,
    normalDeg: 0,
    halfWidthNm: 300,
  },
  wall: { widthNm: 100, slopeNmPerK: 0 },
  fringe: { side: "metallic", amplitudeRad: 0, periodNm: 240, decayNm: 150, phaseRad: -1.3 },
  levels: {
    amplitudeInsulating: 1,
    amplitudeMetallic: 2.2,
    phaseInsulatingRad: 0,
    phaseMetallicRad: 0.6,
    insulatingSlopePerK: 0.0008,
    metallicSlopePerK: -0.0012,
  },
  gain: { frameSd: 0.06, rowSd: 0.008, rowWalkSd: 0.0015 },
  phaseOffset: { rowSdRad: 0.012, rowWalkSdRad: 0.004, anyPhase: true },
  noise: { complex: 0.05, amplitude: 0, phaseRad: 0.01, correlationXPx: 0, correlationYPx: 0 },
  topography: {
    roughnessNm: 1.2,
    roughnessScaleNm: 22,
    wavinessNm: 1.5,
    wavinessScaleNm: 140,
    tiltNmPerUm: 6,
    rowSdNm: 0.25,
    rowWalkSdNm: 0.08,
    noiseNm: 0.25,
  },
  drift: { stepSdNm: 35, jumpChance: 0.1, jumpNm: 320, limitNm: 550, listNm: null },
  debris: { perUm2: 2.2, list: null },
  scars: { perFrame: 1.5, maxLengthPx: 40 },
  unmeasured: { chance: 0.2, maxRows: 12, list: null },
};

/** The default spec with some of its parts replaced. A fresh seed alone gives another cooldown of the same film. */
export function defaultSpec(overrides: SpecOverrides = {}): CooldownSpec {
  return mergeSpec(DEFAULT, overrides);
}

/** `spec` with some of its parts replaced; groups merge one level deep, lists are replaced. */
export function mergeSpec(spec: CooldownSpec, overrides: SpecOverrides): CooldownSpec {
  const o = overrides;
  return {
    ...spec,
    ...Object.fromEntries(Object.entries(o).filter(([, v]) => v !== undefined)),
    pixel: { ...spec.pixel, ...o.pixel },
    origin: { ...spec.origin, ...o.origin },
    tip: { ...spec.tip, ...o.tip },
    transition: { ...spec.transition, ...o.transition },
    domains: { ...spec.domains, ...o.domains },
    wall: { ...spec.wall, ...o.wall },
    fringe: { ...spec.fringe, ...o.fringe },
    levels: { ...spec.levels, ...o.levels },
    gain: { ...spec.gain, ...o.gain },
    phaseOffset: { ...spec.phaseOffset, ...o.phaseOffset },
    noise: { ...spec.noise, ...o.noise },
    topography: { ...spec.topography, ...o.topography },
    drift: { ...spec.drift, ...o.drift },
    debris: { ...spec.debris, ...o.debris },
    scars: { ...spec.scars, ...o.scars },
    unmeasured: { ...spec.unmeasured, ...o.unmeasured },
  };
}
