import * as z from "zod";
import { ISO_TIME, parseTime } from "./times.js";

const positive = z.number().positive();
const name = z.string().trim().min(1).max(200);
const path = z.string().min(1).max(4096);
export const kelvin = z.number().positive().max(1000);

const time = z.string().refine((s) => ISO_TIME.test(s) && !Number.isNaN(parseTime(s)));

/** The images that a frame can have, by their name in `stacks` and in the head of a frames table. */
export const IMAGE_KEYS = [
  "topography",
  "amplitude",
  "phase",
  "signal",
  "real",
  "imaginary",
  "topography_retrace",
  "amplitude_retrace",
  "phase_retrace",
] as const;
export type ImageKey = (typeof IMAGE_KEYS)[number];

const lengthUnit = z.enum(["nm", "um", "m", "V"]);

export const seriesSchema = z.strictObject({
  branch: z.enum(["cooling", "warming"]),
  stacks: z
    .strictObject({
      topography: path.optional(),
      amplitude: path.optional(),
      phase: path.optional(),
      signal: path.optional(),
      real: path.optional(),
      imaginary: path.optional(),
      topography_retrace: path.optional(),
      amplitude_retrace: path.optional(),
      phase_retrace: path.optional(),
    } satisfies Record<ImageKey, unknown>)
    .optional(),
  temperatures_K: z.array(kelvin).min(1).optional(),
  started_at: z.array(time).min(1).optional(),
  ended_at: z.array(time).min(1).optional(),
  frames: path.optional(),
});
export type SeriesEntry = z.infer<typeof seriesSchema>;

export const thermometrySchema = z.strictObject({
  log: path,
  time: z.string().min(1).max(200),
  temperature: z.string().min(1).max(200),
  unit: z.enum(["K", "C"]),
  lag_s: z.number().nonnegative().max(86_400).optional(),
  time_zone: z.string().min(1).max(60).optional(),
});
export type ThermometryEntry = z.infer<typeof thermometrySchema>;

const length = z.number().finite();
export const excludeSchema = z.array(
  z.strictObject({
    frame: z.number().int().nonnegative(),
    region_nm: z.tuple([length, length, length, length]).optional(),
    reason: z.string().trim().min(1).max(400),
  }),
);
export type ExcludeEntry = z.infer<typeof excludeSchema>[number];

/** `cooldown.yaml`, as far as types, ranges and spelling go; what depends on several keys at once is checked apart. */
export const cooldownSchema = z.strictObject({
  sample: name,
  cooldown: name,
  region: name.optional(),
  scan: z.strictObject({ pixel_size_nm: z.tuple([positive, positive]).optional() }).optional(),
  tip: z.strictObject({ resolution_nm: positive, resolution_sd_nm: z.number().nonnegative().optional() }).optional(),
  light: z
    .strictObject({
      photon_energy_meV: positive.optional(),
      wavenumber_per_cm: positive.optional(),
      wavelength_um: positive.optional(),
    })
    .optional(),
  film: z.strictObject({ thickness_nm: positive.optional() }).optional(),
  channels: z
    .strictObject({
      topography: z.strictObject({ unit: lengthUnit.optional(), nm_per_unit: z.number().optional() }).optional(),
      amplitude: z
        .strictObject({ unit: z.string().max(40).optional(), harmonic: z.number().int().min(1).max(20).optional() })
        .optional(),
      phase: z.strictObject({ unit: z.enum(["rad", "deg"]).optional() }).optional(),
    })
    .optional(),
  thermometry: thermometrySchema.optional(),
  series: z.array(seriesSchema).min(1),
  exclude: excludeSchema.optional(),
});
export type CooldownEntry = z.infer<typeof cooldownSchema>;
export type ChannelsEntry = NonNullable<CooldownEntry["channels"]>;

interface KeyWords {
  readonly expected: string;
  readonly fix: string;
  /** What to do where the value is no number, if that is something else. */
  readonly number?: string;
  /** What to do where the key is missing, if that is something else. */
  readonly add?: string;
}

const fileWords: KeyWords = {
  expected: "the name of an image file",
  fix: "give the file's name relative to the YAML file",
};

/** What each key must hold, in words; `[]` stands for any place in a list. Also the list of keys there are. */
export const keyWords: Readonly<Record<string, KeyWords>> = {
  sample: {
    expected: "the sample's name, as text",
    fix: "write it in quotes if it is a number",
    add: "add for example `sample: KV-14`",
  },
  cooldown: {
    expected: "the cooldown's own name, as text",
    fix: "write it in quotes if it is a number",
    add: "add a name that no other cooldown has, for example `cooldown: kv14-run3`",
  },
  region: { expected: "a name, as text", fix: "write it in quotes if it is a number, or leave it out" },
  scan: { expected: "a map with pixel_size_nm", fix: "add `scan: { pixel_size_nm: [10, 10] }` with your pixel size" },
  "scan.pixel_size_nm": {
    expected: "two numbers above 0: nm a column (fast axis), nm a row (slow axis)",
    fix: "write for example `pixel_size_nm: [10, 10]`",
  },
  "scan.pixel_size_nm[]": { expected: "a number of nm above 0", fix: "write for example `pixel_size_nm: [10, 10]`" },
  tip: { expected: "a map with resolution_nm", fix: "add resolution_nm, or leave `tip` out" },
  "tip.resolution_nm": {
    expected: "a number of nm above 0 (full width at half maximum)",
    fix: "give the measured resolution, or leave `tip` out: then only apparent widths are reported",
  },
  "tip.resolution_sd_nm": {
    expected: "a number of nm, 0 or more",
    fix: "give its standard deviation, or leave it out",
  },
  light: {
    expected: "a map with one of photon_energy_meV, wavenumber_per_cm, wavelength_um",
    fix: "give one of the three, or leave `light` out",
  },
  "light.photon_energy_meV": { expected: "a number above 0", fix: "write for example `photon_energy_meV: 100`" },
  "light.wavenumber_per_cm": { expected: "a number above 0", fix: "write for example `wavenumber_per_cm: 806.55`" },
  "light.wavelength_um": { expected: "a number above 0", fix: "write for example `wavelength_um: 12.398`" },
  film: { expected: "a map with thickness_nm", fix: "give thickness_nm, or leave `film` out" },
  "film.thickness_nm": { expected: "a number of nm above 0", fix: "give the thickness, or leave it out" },
  channels: { expected: "a map of topography, amplitude, phase", fix: "give a map, or leave `channels` out" },
  "channels.topography": { expected: "a map with unit", fix: "write for example `topography: { unit: nm }`" },
  "channels.topography.unit": {
    expected: "nm, um, m, or V with nm_per_unit",
    fix: "convert the file, or give `unit: V` with the nm of one unit in nm_per_unit",
  },
  "channels.topography.nm_per_unit": { expected: "a number, not 0", fix: "give the nm of one volt" },
  "channels.amplitude": { expected: "a map, with unit if you like", fix: "write `amplitude: {}`" },
  "channels.amplitude.unit": { expected: "text of at most 40 letters", fix: "write for example `unit: mV`" },
  "channels.amplitude.harmonic": {
    expected: "the harmonic of the tip's frequency, a whole number from 1 to 20",
    fix: "write for example `harmonic: 3`",
  },
  "channels.phase": { expected: "a map with unit", fix: "write for example `phase: { unit: rad }`" },
  "channels.phase.unit": { expected: "rad or deg", fix: "convert the file to rad or deg" },
  thermometry: {
    expected: "a map with log, time, temperature and unit",
    fix: "name the log's file and two of its columns, or leave `thermometry` out",
  },
  "thermometry.log": { expected: "the name of a file with a column a quantity", fix: "give the log's file name" },
  "thermometry.time": { expected: "the name of a column", fix: "give the head of the column with the times" },
  "thermometry.temperature": {
    expected: "the name of a column",
    fix: "give the head of the column of the sensor next to the sample",
  },
  "thermometry.unit": { expected: "K or C", fix: "write `unit: K` or `unit: C`" },
  "thermometry.lag_s": {
    expected: "the seconds that the sample lags behind the sensor, 0 or more",
    fix: "give the measured time constant, or leave it out",
  },
  "thermometry.time_zone": {
    expected: "an offset such as +02:00, or the name of a zone",
    fix: 'write for example `time_zone: "+02:00"` or `time_zone: Europe/Paris`',
  },
  series: {
    expected: "a list with at least one series",
    fix: "add a series: branch, stacks and temperatures_K, or frames",
  },
  "series[]": {
    expected: "a map with branch, and stacks with temperatures_K, or frames",
    fix: "begin each series with `- branch: cooling` or `- branch: warming`",
  },
  "series[].branch": { expected: "cooling or warming", fix: "give the direction of temperature of this series" },
  "series[].stacks": { expected: "a map: one file a channel, amplitude at least", fix: "add `amplitude: FILE`" },
  ...Object.fromEntries(IMAGE_KEYS.map((key) => [`series[].stacks.${key}`, fileWords])),
  "series[].temperatures_K": {
    expected: "a list of temperatures, one a page",
    fix: "write for example `temperatures_K: [180, 175, 170]`",
  },
  "series[].temperatures_K[]": {
    expected: "a temperature in K above 0 and at most 1000",
    fix: "give it in kelvin (0 °C is 273.15 K)",
    number: "write a number, such as 165.5; a page whose temperature is not known is left out by a frames table",
  },
  ...Object.fromEntries(
    ["started_at", "ended_at"].flatMap((key) => [
      [
        `series[].${key}`,
        { expected: "a list of times, one a page", fix: `write for example \`${key}: ["2024-05-17T09:30:00+02:00"]\`` },
      ],
      [`series[].${key}[]`, { expected: "a time as ISO 8601", fix: "write for example 2024-05-17T09:30:00+02:00" }],
    ]),
  ),
  "series[].frames": { expected: "the name of a .csv file", fix: "give the file's name relative to the YAML file" },
  exclude: { expected: "a list of what to leave out", fix: "write `- { frame: 12, reason: tip changed }`" },
  "exclude[]": {
    expected: "a map with frame and reason, and region_nm for a part of the frame",
    fix: "write `- { frame: 12, reason: tip changed }`",
  },
  "exclude[].frame": {
    expected: "the number of a frame, from 0 in the order of this file",
    fix: "`coldseam check` prints the frames of each series",
  },
  "exclude[].region_nm": {
    expected: "four numbers: left, top, right, bottom, in nm from the frame's first pixel",
    fix: "write for example `region_nm: [0, 0, 500, 300]`",
  },
  "exclude[].region_nm[]": { expected: "a number of nm", fix: "write for example `region_nm: [0, 0, 500, 300]`" },
  "exclude[].reason": { expected: "why, as text", fix: "say why: it is stored with the result" },
};
