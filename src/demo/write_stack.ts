import { mkdirSync, writeFileSync } from "node:fs";
import { dirname, join } from "node:path";
import { CHANNELS, type ChannelName } from "../model/cooldown.js";
import { dataOf } from "../model/raster.js";
import { simulateCooldown } from "./simulate.js";
import type { CooldownSpec } from "./spec.js";
import { TRUTH_FILE, type CooldownTruth, type FrameTruth } from "./truth.js";
import { createTiff, type TiffWriter } from "./write_tiff.js";

/** Names of a series' stacks: `cooling_phase.tif`, and from the second cycle on `warming2_phase.tif`. */
function stackName(spec: CooldownSpec, series: number, channel: ChannelName): string {
  const branch = spec.series[series].branch;
  const before = spec.series.slice(0, series).filter((s) => s.branch === branch).length;
  return `${branch}${before === 0 ? "" : before + 1}_${channel}.tif`;
}

function yamlOf(spec: CooldownSpec): string {
  const series = spec.series.map(
    (s, k) => `  - branch: ${s.branch}
    stacks:
      topography: ${stackName(spec, k, "topography")}
      amplitude: ${stackName(spec, k, "amplitude")}
      phase: ${stackName(spec, k, "phase")}
    temperatures_K: [${s.temperaturesK.join(", ")}]
`,
  );
  return `# Simulated data of an invented sample. What is true of it is kept in truth/truth.json.
sample: ${spec.sample}
cooldown: ${spec.cooldown} # unique in a database
region: ${spec.region} # cooldowns that show the same region can be compared
scan:
  pixel_size_nm: [${spec.pixel.xNm}, ${spec.pixel.yNm}] # fast axis x (columns), slow axis y (rows)
tip:
  resolution_nm: ${spec.tip.statedNm} # full width at half maximum of the tip's point response
  resolution_sd_nm: ${spec.tip.statedSdNm} # how well that is known
light:
  photon_energy_meV: 100
film:
  thickness_nm: 30
channels:
  topography: { unit: nm }
  amplitude: {} # any unit: only ratios matter
  phase: { unit: rad } # the optical phase
series: # in the order they were measured; one stack a channel, one page a temperature
${series.join("")}`;
}

/** Simulates a cooldown and writes it as a laboratory would keep it: multi-page float32 TIFF stacks and `cooldown.yaml` in `dir`, and
 *  the truth in `dir/truth/truth.json`. Holds one frame at a time in memory. Returns the path of the YAML file. */
export function generateStack(spec: CooldownSpec, dir: string): string {
  const simulated = simulateCooldown(spec);
  mkdirSync(dir, { recursive: true });
  const frames: FrameTruth[] = [];
  let open: Record<ChannelName, TiffWriter> | null = null;
  let openSeries = -1;
  const closeAll = (): void => {
    if (open !== null) for (const c of CHANNELS) open[c].close();
    open = null;
  };
  try {
    for (const { frame, series } of simulated.plan) {
      if (open === null || series !== openSeries) {
        closeAll();
        const create = (c: ChannelName): TiffWriter => createTiff(join(dir, stackName(spec, series, c)));
        open = { topography: create("topography"), amplitude: create("amplitude"), phase: create("phase") };
        openSeries = series;
      }
      const f = simulated.frame(frame);
      for (const c of CHANNELS) open[c].addPage(dataOf(f[c]), spec.rows, spec.cols);
      const { signedDistanceNm: _d, states: _s, measured: _m, debris: _p, ...truth } = f.truth;
      frames.push(truth);
    }
  } finally {
    closeAll();
  }
  const truth: CooldownTruth = {
    sample: spec.sample,
    cooldown: spec.cooldown,
    spec,
    leastAreaNm2: simulated.leastAreaNm2,
    hasFringes: spec.fringe.amplitudeRad !== 0,
    frames,
    cycles: simulated.cycles(),
  };
  mkdirSync(dirname(join(dir, TRUTH_FILE)), { recursive: true });
  writeFileSync(join(dir, TRUTH_FILE), `${JSON.stringify(truth, null, 1)}\n`);
  const yamlFile = join(dir, "cooldown.yaml");
  writeFileSync(yamlFile, yamlOf(spec));
  return yamlFile;
}
