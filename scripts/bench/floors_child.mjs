// The floors of `floors.mjs`, measured in a process of their own. Prints JSON.
import { readCooldown, loadFrame } from "../../dist/input/index.js";
import { settingsWith } from "../../dist/settings.js";
import { cleanFrame } from "../../dist/stages/clean/index.js";
import { findDebrisInFrame } from "../../dist/stages/debris/index.js";
import { fitLevels, mapStates, trackLevels } from "../../dist/stages/states/index.js";
import { makeRandom } from "../../dist/numerics/random.js";
import { fastKink } from "../../dist/numerics/kink.js";
import { ProfileData } from "../../dist/stages/walls/profile_data.js";
import { ProfileFitter, PARAMETERS } from "../../dist/stages/walls/profile_fit.js";

/** Least milliseconds of `work` over so many runs, after a few that warm up. */
function least(times, work) {
  for (let k = 0; k < 3; k++) work();
  let best = Infinity;
  for (let k = 0; k < times; k++) {
    const t = performance.now();
    work();
    best = Math.min(best, performance.now() - t);
  }
  return best;
}

const settings = settingsWith();
const cooldown = await readCooldown(process.argv[2]);
const raws = [];
for (const info of cooldown.frames) raws.push(await loadFrame(cooldown, info));
// The frame with the most of both states: in the middle of a branch.
const middle = Math.floor(cooldown.frames.length / 4);

const channels = [raws[middle].topography, raws[middle].amplitude, raws[middle].phase].map((c) => c.values.data);
const copies = channels.map((c) => new Float32Array(c.length));
const copyMs = least(40, () => {
  channels.forEach((c, k) => {
    const copy = copies[k];
    for (let i = 0; i < c.length; i++) copy[i] = c[i];
  });
});

const cleanMs = least(5, () => cleanFrame(raws[middle], settings.clean));
const cleans = raws.map((r) => cleanFrame(r, settings.clean).clean);
const debris = cleans.map((c) => findDebrisInFrame(c, cooldown.tip, settings.debris));
const fits = cleans.map((c, k) => fitLevels(c, debris[k], cooldown.tip, settings.states));
const track = trackLevels(fits, cooldown.frames, settings.states);
const statesMs = least(5, () => {
  const fit = fitLevels(cleans[middle], debris[middle], cooldown.tip, settings.states);
  mapStates(cleans[middle], debris[middle], fit, track.levels[middle], cooldown.tip, settings.states);
});

// Fits of made profiles: 300 pixels within 180 nm of a wall of 100 nm, a 30 nm tip, noise 4 % of the step; no tilt.
const PIXELS = 300;
const SIGMA = 30 / 2.3548200450309493;
const PROFILES = 40;
const random = makeRandom(3);
const u = new Float64Array(4);
const profiles = Array.from({ length: PROFILES }, () => {
  const data = new ProfileData();
  data.reserve(PIXELS);
  data.count = PIXELS;
  const width = (80 + 40 * random.uniform()) / Math.log(9);
  const centre = 8 * random.normal();
  for (let k = 0; k < PIXELS; k++) {
    data.distance[k] = 360 * (random.uniform() - 0.5);
    data.arc[k] = 60 * (random.uniform() - 0.5);
    fastKink(data.distance[k] - centre, width, SIGMA, u);
    data.value[k] = 1 + 1.2 * u[0] + 0.05 * random.normal();
    data.alpha[k] = data.beta[k] = 1;
    data.weight[k] = 20;
  }
  return data;
});
const free = [true, true, true, true, true, false];
const fitter = new ProfileFitter();
let evaluations = 0;
const fitOne = (data) => {
  fitter.p.set([1, 2.2, 0, 0, 35 ** 2, SIGMA]);
  if (fitter.fit(data, free, null) !== "converged") throw new Error("a made profile did not converge");
  evaluations += fitter.iterations + 1;
};
for (const data of profiles) fitOne(data);
evaluations = 0;
let runs = 0;
const fitMs = least(200, () => {
  runs++;
  for (const data of profiles) fitOne(data);
});
const perFit = evaluations / (runs * PROFILES);

const x = Float64Array.from({ length: PIXELS }, () => 4 * (random.uniform() - 0.5));
let sink = 0;
const tanhMs = least(200, () => {
  for (let k = 0; k < 10; k++) for (let i = 0; i < PIXELS; i++) sink += Math.tanh(x[i] + k * 1e-9);
});
// One evaluation: a fit that may take no step makes the first one, and the trial that ends it.
const evaluationMs =
  least(200, () => {
    for (const data of profiles) {
      fitter.p.set([1, 2.2, 0, 0, 35 ** 2, SIGMA]);
      fitter.fit(data, free, null, 0);
    }
  }) / PROFILES;
if (!Number.isFinite(sink) || fitter.p.length !== PARAMETERS) throw new Error("nothing was computed");
process.stdout.write(
  JSON.stringify({
    copyMs,
    cleanMs,
    statesMs,
    fitUs: (1000 * fitMs) / PROFILES,
    evaluationUs: 1000 * evaluationMs,
    evaluations: perFit,
    tanhUs: 1000 * tanhMs,
  }),
);
