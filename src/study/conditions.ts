import { defaultSpec, type CooldownSpec, type SpecOverrides } from "../demo/index.js";

/** One set of circumstances of the accuracy study; each is simulated several times, with seeds of their own. */
export interface Condition {
  readonly name: string;
  readonly what: string;
  readonly spec: SpecOverrides;
}

const COOLING_K = [190, 172, 163, 157, 152, 147, 141, 120];
const WARMING_K = [122, 146, 154, 159, 163, 168, 175, 192];

/** From one temperature to another in steps of 1.5 K. */
const fine = (fromK: number, toK: number): number[] =>
  Array.from({ length: Math.abs(toK - fromK) / 1.5 + 1 }, (_, k) => fromK + Math.sign(toK - fromK) * 1.5 * k);

/** Smaller than a laboratory's frames, so that many can be run: 128 × 128 pixels of 10 nm, 2 × 8 temperatures. */
const BASE: SpecOverrides = {
  rows: 128,
  cols: 128,
  series: [
    { branch: "cooling", temperaturesK: COOLING_K },
    { branch: "warming", temperaturesK: WARMING_K },
  ],
  drift: { stepSdNm: 30, jumpNm: 250, limitNm: 250 },
};

/** A larger field: in a small one most domains meet the edge, and few events are left to count. */
const FINE_STEPS: SpecOverrides = {
  rows: 224,
  cols: 224,
  series: [
    { branch: "cooling", temperaturesK: fine(160.5, 144) },
    { branch: "warming", temperaturesK: fine(151.5, 168) },
  ],
  drift: { stepSdNm: 60, jumpChance: 0 },
};

export const CONDITIONS: readonly Condition[] = [
  { name: "usual", what: "walls of 100 nm, tip 30 nm, 10 nm pixels, noise 5 % of the insulating level", spec: {} },
  { name: "noisy", what: "noise 12 %", spec: { noise: { complex: 0.12, phaseRad: 0.02 } } },
  {
    name: "correlated",
    what: "noise smoothed over a pixel along the fast axis",
    spec: { noise: { correlationXPx: 0.7 } },
  },
  { name: "narrow", what: "walls as wide as the tip, 30 nm", spec: { wall: { widthNm: 30 } } },
  { name: "half-tip", what: "walls of 15 nm, half the tip", spec: { wall: { widthNm: 15 } } },
  { name: "sharp", what: "walls of no width", spec: { wall: { widthNm: 0 } } },
  {
    name: "wide",
    what: "walls of 240 nm, eight times the tip, in larger domains",
    spec: { wall: { widthNm: 240 }, domains: { scaleNm: 330 }, rows: 192, cols: 192 },
  },
  {
    name: "coarse",
    what: "18 nm pixels, 0.6 of the tip",
    spec: { pixel: { xNm: 18, yNm: 18 }, domains: { scaleNm: 260 } },
  },
  { name: "oblong", what: "pixels of 10 × 14 nm", spec: { pixel: { xNm: 10, yNm: 14 } } },
  { name: "small-domains", what: "domains little larger than the walls are wide", spec: { domains: { scaleNm: 90 } } },
  {
    name: "line-noise",
    what: "row gain 3 %, row phase 0.05 rad with a random walk",
    spec: {
      gain: { rowSd: 0.03, rowWalkSd: 0.004 },
      phaseOffset: { rowSdRad: 0.05, rowWalkSdRad: 0.01 },
      topography: { rowSdNm: 0.6 },
    },
  },
  { name: "gain", what: "gain changes 20 % from frame to frame", spec: { gain: { frameSd: 0.2 } } },
  { name: "debris", what: "three times the particles", spec: { debris: { perUm2: 6.6 } } },
  {
    name: "jumps",
    what: "jumps up to 0.5 µm between any two frames",
    spec: { drift: { stepSdNm: 60, jumpChance: 0.7, jumpNm: 450, limitNm: 380 } },
  },
  {
    name: "fringes",
    what: "fringes of 0.35 rad, period 240 nm, decay 150 nm",
    spec: { fringe: { amplitudeRad: 0.35 } },
  },
  { name: "weak-fringes", what: "fringes of 0.12 rad", spec: { fringe: { amplitudeRad: 0.12 } } },
  {
    name: "slow-fringes",
    what: "fringes of 0.35 rad, period 160 nm, decay 250 nm, larger domains",
    spec: {
      fringe: { amplitudeRad: 0.35, periodNm: 160, decayNm: 250 },
      domains: { scaleNm: 330 },
      rows: 192,
      cols: 192,
    },
  },
  {
    name: "fine-steps",
    what: "temperatures 1.5 K apart, drift of 60 nm between frames, 224 × 224 pixels: domain events",
    spec: FINE_STEPS,
  },
  {
    name: "fine-small",
    what: "the same with domains little larger than the walls are wide",
    spec: { ...FINE_STEPS, domains: { scaleNm: 90 } },
  },
];

/** The spec of one run of a condition. */
export function specOf(c: Condition, run: number, seed: number): CooldownSpec {
  const base = defaultSpec(BASE);
  const merged = defaultSpec({
    ...BASE,
    ...c.spec,
    drift: { ...base.drift, ...c.spec.drift },
    cooldown: `${c.name}-${run}`,
    sample: "study",
    seed: seed + 1000 * run,
    sampleSeed: seed + 1000 * run + 500,
  });
  return merged;
}
