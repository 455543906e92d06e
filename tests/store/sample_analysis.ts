import { deflateSync } from "node:zlib";
import type { Analysis, FrameResult } from "../../src/model/analysis.js";
import type { Cooldown, FrameInfo } from "../../src/model/cooldown.js";
import type { WallProfile } from "../../src/model/walls.js";

const profile = (n: number, change: Partial<WallProfile> = {}): WallProfile => ({
  wall: 0,
  profile: n,
  xNm: 100 + 10 * n,
  yNm: 50,
  normalDeg: 90,
  arcNm: 30 * n,
  stretchNm: 60,
  widthNm: 84.25,
  widthSdNm: 3.5,
  widthSdTipNm: 0.75,
  widthUpper95Nm: 90.5,
  resolved: true,
  apparentWidthNm: 91.125,
  amplitudeInsulating: 1,
  amplitudeMetallic: 2.25,
  reducedChi2: 1.0625,
  pixels: 210,
  flag: "",
  ...change,
});

/** As a thermometer's log gives them. */
const FROM_LOG = { temperatureSdK: 0.028867513459481287, rampKPerS: 1 / 6000, lagShiftK: -0.005 };

/** A small analysis made by hand, sound in itself: two frames, the second undecided and not placed. */
export function sampleAnalysis(
  change: {
    name?: string;
    sample?: string;
    settings?: Record<string, number>;
    /** A hexadecimal digit that stands for the pixel values of its images. */
    images?: string;
    /** Number of frames, two or more: those after the second are warming ones like it, a kelvin apart. */
    frames?: number;
    programVersion?: string;
  } = {},
): Analysis {
  const info = (frame: number, branch: "cooling" | "warming", temperatureK: number): FrameInfo => ({
    frame,
    series: frame,
    branch,
    cycle: 1,
    temperatureK,
    ...(frame === 1 ? FROM_LOG : {}),
    startedAt: null,
    endedAt: null,
    stageXNm: null,
    stageYNm: null,
    rows: 2,
    cols: 3,
    sources: { amplitude: { file: "/nowhere/a.tif", label: `a.tif#${frame}`, format: "tiff", page: frame, scale: 1 } },
  });
  const images = change.images ?? "a";
  const later = Array.from({ length: (change.frames ?? 2) - 1 }, (_, k) => k + 1);
  const cooldown: Cooldown = {
    yamlFile: "/nowhere/cooldown.yaml",
    sample: change.sample ?? "KV-14",
    cooldown: change.name ?? "hand-made",
    region: "A",
    pixel: { xNm: 10, yNm: 12 },
    tip: { resolutionNm: 30, resolutionSdNm: 1 },
    photonEnergyMeV: 100,
    filmThicknessNm: null,
    amplitudeUnit: "",
    frames: [info(0, "cooling", 160), ...later.map((frame) => info(frame, "warming", 149 + frame))],
    sources: [
      {
        path: "a.tif",
        sha256: `${images.repeat(62)}${later.length.toString(16).padStart(2, "0")}`,
        bytes: 24 * (1 + later.length),
      },
    ],
    notices: [],
  };
  const base: FrameResult = {
    frame: 0,
    imagesSha256: images.repeat(64),
    verdict: "mixed",
    drift: { frame: 0, xNm: 0, yNm: 0, sdNm: 0 },
    fraction: { value: 0.5, low: 0.49, high: 0.51 },
    amplitudeInsulating: 1,
    amplitudeMetallic: 2.25,
    gain: 1,
    map: { rows: 2, cols: 3, deflated: deflateSync(Uint8Array.of(0, 0, 1, 0, 1, 255)) },
    regions: [
      { label: 1, kind: "metallic", areaNm2: 240, perimeterNm: null, xNm: 15, yNm: 6, touchesBorder: true },
      { label: 2, kind: "insulating", areaNm2: 360, perimeterNm: null, xNm: 5, yNm: 6, touchesBorder: true },
    ],
    wallLengthNm: 120,
    walls: [
      {
        wall: 0,
        points: Float64Array.of(0, 0, 96, 72),
        normals: Float64Array.of(-0.6, 0.8, -0.6, 0.8),
        arcNm: Float64Array.of(0, 120),
        closed: false,
        lengthNm: 120,
      },
    ],
    profiles: [
      profile(0),
      profile(1, { widthNm: null, widthSdNm: null, widthSdTipNm: null, resolved: false, widthUpper95Nm: 25 }),
    ],
    widths: { profiles: 2, medianNm: 84.25, medianLowNm: 80, medianHighNm: 88, unresolvedShare: 0.5 },
    fringes: [
      {
        frame: 0,
        wall: 0,
        stretch: 0,
        arcFromNm: 0,
        arcToNm: 120,
        pValue: 0.001,
        side: "metallic",
        contrastRad: 0.125,
        contrastSdRad: 0.01,
        offsetNm: 62.5,
        periodNm: null,
        periodSdNm: null,
        decayNm: null,
        decaySdNm: null,
        detected: true,
        adjustedP: 0.002,
      },
    ],
    fringeShare: 1,
    usablePixels: 5,
    debrisPixels: 1,
    scarPixels: 0,
    noise: { amplitudeRelative: 0.05, phaseRad: 0.0625, topographyNm: null, byRetrace: ["amplitude", "phase"] },
  };
  const single = (frame: number): FrameResult => ({
    ...base,
    frame,
    imagesSha256: `${images.repeat(62)}${frame.toString(16).padStart(2, "0")}`,
    verdict: "undecided",
    drift: { frame, xNm: null, yNm: null, sdNm: null },
    fraction: null,
    amplitudeInsulating: null,
    amplitudeMetallic: null,
    regions: [],
    wallLengthNm: 0,
    walls: [],
    profiles: [],
    widths: { profiles: 0, medianNm: null, medianLowNm: null, medianHighNm: null, unresolvedShare: null },
    fringes: [],
    fringeShare: null,
  });
  return {
    cooldown,
    programVersion: change.programVersion ?? "0.0.0-test",
    settings: { "walls.reachNm": 300, ...change.settings },
    frames: [base, ...later.map(single)],
    domains: [
      { domain: 0, kind: "metallic", origin: "first-frame", fate: "last-frame", appearances: [{ frame: 0, label: 1 }] },
      { domain: 1, kind: "insulating", origin: "first-frame", fate: "vanished", appearances: [{ frame: 0, label: 2 }] },
    ],
    loops: [
      {
        cycle: 1,
        coolingHalfK: { value: 160, low: 158, high: 162 },
        warmingHalfK: { value: null, low: null, high: null },
        widthK: { value: null, low: null, high: null },
        areaK: null,
        lowestFraction: 0.5,
        highestFraction: 0.5,
        complete: false,
      },
    ],
    notices: [{ frame: 1, code: "drift-failed", message: "could not be placed" }],
  };
}
