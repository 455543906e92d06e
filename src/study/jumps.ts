import { defaultSpec, simulateCooldown } from "../demo/index.js";
import type { FrameInfo } from "../model/cooldown.js";
import { childSeed, makeRandom } from "../numerics/random.js";
import { settingsWith } from "../settings.js";
import { cleanFrame } from "../stages/clean/index.js";
import {
  choosePairs,
  furtherPairs,
  measurePair,
  prepareForDrift,
  solveDrift,
  type DriftImage,
} from "../stages/drift/index.js";

const SIDE_PX = 128;
const PIXEL_NM = 10;
const PIXEL = { xNm: PIXEL_NM, yNm: PIXEL_NM };
const FRAMES = 50;
/** Largest jump between two frames, as a share of the window, along either axis. */
const JUMP = 0.4;
/** A place or shift farther off than this is wrong. */
const WRONG_PX = 1;

/** What became of many shifts or places. */
interface Tally {
  all: number;
  /** Given as sure. */
  sure: number;
  /** Of those, wrong. */
  wrong: number;
  /** Sum of squares of the right ones, px² over both axes. */
  squares: number;
}

const emptyTally = (): Tally => ({ all: 0, sure: 0, wrong: 0, squares: 0 });

function count(t: Tally, errorNm: { readonly x: number; readonly y: number } | null): void {
  t.all++;
  if (errorNm === null) return;
  t.sure++;
  const px = Math.hypot(errorNm.x, errorNm.y) / PIXEL_NM;
  if (px > WRONG_PX) t.wrong++;
  else t.squares += px * px;
}

export interface JumpTrial {
  readonly channel: "topography" | "amplitude alone";
  /** Shifts between frames that follow one another. */
  readonly steps: Tally;
  /** All shifts that placing measures. */
  readonly pairs: Tally;
  /** Frames after the first of each cooldown. */
  readonly places: Tally;
}

/** Frames that lie anywhere within ±JUMP/2 of the window along either axis, so that no two are farther apart than JUMP; a new sample each cooldown. */
function framesOf(seed: number): {
  infos: FrameInfo[];
  images: Record<JumpTrial["channel"], DriftImage[]>;
  at: { x: number; y: number }[];
} {
  const random = makeRandom(childSeed(seed, 1));
  const reach = 0.5 * JUMP * SIDE_PX * PIXEL_NM;
  const listNm = Array.from({ length: FRAMES }, (_, k): [number, number] =>
    k === 0 ? [0, 0] : [reach * (2 * random.uniform() - 1), reach * (2 * random.uniform() - 1)],
  );
  const down = Array.from({ length: FRAMES / 2 }, (_, k) => 190 - (70 * k) / (FRAMES / 2 - 1));
  const spec = defaultSpec({
    rows: SIDE_PX,
    cols: SIDE_PX,
    pixel: PIXEL,
    series: [
      { branch: "cooling", temperaturesK: down },
      { branch: "warming", temperaturesK: [...down].reverse() },
    ],
    drift: { listNm },
    cooldown: `jumps-${seed}`,
    sample: "study",
    seed,
    sampleSeed: seed + 500,
  });
  const made = simulateCooldown(spec);
  const settings = settingsWith();
  const source = { file: "", label: "", format: "npy", page: 0, scale: 1 } as const;
  const infos: FrameInfo[] = [];
  const images: Record<JumpTrial["channel"], DriftImage[]> = { topography: [], "amplitude alone": [] };
  for (let k = 0; k < FRAMES; k++) {
    const raw = made.frame(k);
    const { clean } = cleanFrame(raw, settings.clean);
    images.topography.push(prepareForDrift(clean, settings.drift));
    images["amplitude alone"].push(prepareForDrift({ ...clean, topography: null }, settings.drift));
    infos.push({
      frame: k,
      series: k < FRAMES / 2 ? 0 : 1,
      branch: raw.branch,
      cycle: raw.cycle,
      temperatureK: raw.temperatureK,
      startedAt: null,
      endedAt: null,
      stageXNm: null,
      stageYNm: null,
      rows: SIDE_PX,
      cols: SIDE_PX,
      sources: { amplitude: source },
    });
  }
  return { infos, images, at: made.plan.map((p) => ({ x: p.driftXNm, y: p.driftYNm })) };
}

/** Places the frames of several cooldowns whose frames jump, with topography and without. */
export function tryJumps(cooldowns: number, seed: number, onDone: () => void = () => undefined): JumpTrial[] {
  const s = settingsWith().drift;
  const trials = (["topography", "amplitude alone"] as const).map((channel): JumpTrial => ({
    channel,
    steps: emptyTally(),
    pairs: emptyTally(),
    places: emptyTally(),
  }));
  for (let run = 0; run < cooldowns; run++) {
    const { infos, images, at } = framesOf(seed + 1000 * run);
    for (const trial of trials) {
      const own = images[trial.channel];
      const measure = (
        pairs: readonly (readonly [number, number])[],
        places: ReturnType<typeof solveDrift>["drifts"] | null,
      ) =>
        pairs.map(([a, b]) => {
          const p = places?.[a];
          const q = places?.[b];
          const known = p?.xNm != null && p.yNm != null && q?.xNm != null && q.yNm != null;
          const predicted = known ? { xNm: (q.xNm ?? 0) - (p.xNm ?? 0), yNm: (q.yNm ?? 0) - (p.yNm ?? 0) } : null;
          const shift = measurePair(own[a], own[b], predicted, s);
          const error =
            shift.status === "ok" ? { x: shift.xNm - (at[b].x - at[a].x), y: shift.yNm - (at[b].y - at[a].y) } : null;
          count(trial.pairs, error);
          if (b === a + 1) count(trial.steps, error);
          return shift;
        });
      const first = measure(choosePairs(infos, null, s), null);
      const rough = solveDrift(infos, first, s);
      const more = furtherPairs(infos, first, rough, PIXEL, s);
      const { drifts } = solveDrift(infos, [...first, ...measure(more, rough.drifts)], s);
      for (const d of drifts.slice(1)) {
        const error = d.xNm === null || d.yNm === null ? null : { x: d.xNm - at[d.frame].x, y: d.yNm - at[d.frame].y };
        count(trial.places, error);
      }
    }
    onDone();
  }
  return trials;
}

function row(name: string, t: Tally): string {
  const rms = t.sure > t.wrong ? Math.sqrt(t.squares / (2 * (t.sure - t.wrong))).toFixed(3) : "";
  return `| ${name} | ${t.all} | ${t.wrong} | ${t.all - t.sure} | ${rms} |`;
}

/** `npm run study -- jumps500 [--runs N] [--seed N]`: frames of 128 × 128 pixels with jumps up to 40 % of the window between any two, 50 a cooldown, ten cooldowns.
 *  Returns the exit code: 1 where a place is wrong by more than a pixel and nothing says so. */
export function runJumps(cooldowns: number, seed: number): number {
  let done = 0;
  const trials = tryJumps(cooldowns, seed, () => process.stderr.write(`jumps ${++done} of ${cooldowns}\n`));
  const lines = trials.flatMap((t) => [
    row(`${t.channel}: shifts from one frame to the next`, t.steps),
    row(`${t.channel}: all shifts measured`, t.pairs),
    row(`${t.channel}: frames`, t.places),
  ]);
  process.stdout.write(
    [
      `${cooldowns} cooldowns of ${FRAMES} frames, ${SIDE_PX} × ${SIDE_PX} pixels, jumps up to ${100 * JUMP} % of the window along either axis, seed ${seed}`,
      "",
      "| what | number | wrong by more than 1 px, not flagged | flagged or none | rms an axis / px |",
      "| --- | --- | --- | --- | --- |",
      ...lines,
      "",
    ].join("\n"),
  );
  return trials.some((t) => t.places.wrong > 0) ? 1 : 0;
}
