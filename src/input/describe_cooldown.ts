import { CHANNELS, type Cooldown, type FrameInfo } from "../model/cooldown.js";
import { countOf, plainText, rangeOf } from "../model/text.js";

/** What was found in a cooldown, in plain lines for a person; names from outside cannot steer the terminal. */
export function describeCooldown(c: Cooldown): string[] {
  const lines = [
    `cooldown ${plainText(c.cooldown)}: sample ${plainText(c.sample)}${c.region === null ? "" : `, region ${plainText(c.region)}`}`,
    `  ${countOf(c.frames.length, "frame")} of ${sizeText(c)}`,
  ];
  for (const run of seriesOf(c.frames)) {
    const [first, last] = [run[0], run[run.length - 1]];
    const kelvin = (f: FrameInfo): number => Number(f.temperatureK.toFixed(3));
    lines.push(
      `  cycle ${first.cycle}, ${first.branch}: ${countOf(run.length, "frame")}, ${rangeOf(kelvin(first), kelvin(last), "K")}`,
    );
  }
  lines.push(`  channels: ${channelText(c)}`);
  lines.push(
    c.tip === null
      ? "  tip: resolution not given, so only apparent wall widths"
      : `  tip: ${c.tip.resolutionNm} ${c.tip.resolutionSdNm > 0 ? `± ${c.tip.resolutionSdNm} nm` : "nm, taken as exact,"} (full width at half maximum)`,
  );
  lines.push(c.photonEnergyMeV === null ? "  light: not given" : `  light: ${lightText(c.photonEnergyMeV)}`);
  if (c.filmThicknessNm !== null) lines.push(`  film: ${c.filmThicknessNm} nm thick`);
  if (c.sources.length > 0) {
    const bytes = c.sources.reduce((sum, s) => sum + s.bytes, 0);
    lines.push(`  files: ${c.sources.length}, ${(bytes / 1e6).toFixed(1)} MB`);
  }
  return lines;
}

function sizeText(c: Cooldown): string {
  const f = c.frames[0];
  if (f === undefined) return "no pixels";
  const um = (px: number, nm: number): string => ((px * nm) / 1000).toPrecision(3);
  return (
    `${f.cols} × ${f.rows} pixels of ${c.pixel.xNm} × ${c.pixel.yNm} nm ` +
    `(${um(f.cols, c.pixel.xNm)} × ${um(f.rows, c.pixel.yNm)} µm)`
  );
}

function seriesOf(frames: readonly FrameInfo[]): FrameInfo[][] {
  const runs = new Map<number, FrameInfo[]>();
  for (const f of frames) {
    const run = runs.get(f.series);
    if (run === undefined) runs.set(f.series, [f]);
    else run.push(f);
  }
  return [...runs.values()];
}

function channelText(c: Cooldown): string {
  return CHANNELS.map((channel) => {
    const n = c.frames.filter((f) => f.sources[channel] !== undefined).length;
    const harmonic = c.amplitudeHarmonic ?? null;
    const unit =
      channel === "amplitude"
        ? `${harmonic === null ? "" : ` (harmonic ${harmonic})`}${c.amplitudeUnit === "" ? "" : ` in ${plainText(c.amplitudeUnit)}`}`
        : "";
    if (n === 0) return `no ${channel}`;
    return n === c.frames.length ? `${channel}${unit}` : `${channel}${unit} (${n} of ${c.frames.length} frames)`;
  }).join(", ");
}

/** hc = 1239.841984 meV µm, 8.065544 cm⁻¹ a meV (CODATA 2018, both exact up to the digits shown). */
function lightText(meV: number): string {
  const round = (x: number): number => Number(x.toPrecision(5));
  return `${round(meV)} meV (${round(meV * 8.06554393738)} cm⁻¹, ${round(1239.84198433 / meV)} µm)`;
}
