import type { FrameStates, Signal } from "../../../src/model/signal.js";
import type { FrameWalls, WallProfile } from "../../../src/model/walls.js";
import { makeRaster } from "../../../src/model/raster.js";
import { apparentWidth } from "../../../src/numerics/kink.js";
import { makeRandom } from "../../../src/numerics/random.js";

export interface Scene {
  rows: number;
  cols: number;
  pixel: { xNm: number; yNm: number };
  /** Direction of the normal to the metallic side, from +x towards +y (down the page), degrees. */
  normalDeg: number;
  sigmaNm: number;
  wNm: number;
  insulating: { amplitude: number; phase: number };
  metallic: { amplitude: number; phase: number };
  fringe: { side: "metallic" | "insulating"; rad: number; periodNm: number; decayNm: number; phaseRad: number };
  /** Noise per component, how much of it comes from the pixel before, and what a row shares, rad. */
  noise: number;
  carry: number;
  rowRad: number;
  /** Each row takes the mean turn of its pixels farther than this from the wall for its own offset; null: rows are left as they are. */
  referencedBeyondNm: number | null;
  seed: number;
}

export const SCENE: Scene = {
  rows: 80,
  cols: 96,
  pixel: { xNm: 10, yNm: 10 },
  normalDeg: 20,
  sigmaNm: 12.74,
  wNm: 40,
  insulating: { amplitude: 1, phase: 0 },
  metallic: { amplitude: 2.2, phase: 0.6 },
  fringe: { side: "metallic", rad: 0, periodNm: 160, decayNm: 120, phaseRad: -1.3 },
  noise: 0.06,
  carry: 0,
  rowRad: 0,
  referencedBeyondNm: null,
  seed: 1,
};

/** The signal of a straight wall against distance: mixture, fringe and blur by a sum over fine steps, written without the stage. */
export function seen(s: Scene, withFringe: boolean): (d: number) => [number, number] {
  const h = 1;
  const reach = 900;
  const n = 2 * reach + 1;
  const re = new Float64Array(n);
  const im = new Float64Array(n);
  const level = (l: { amplitude: number; phase: number }): [number, number] => [
    l.amplitude * Math.cos(l.phase),
    l.amplitude * Math.sin(l.phase),
  ];
  const [a, b] = [level(s.insulating), level(s.metallic)];
  for (let k = 0; k < n; k++) {
    const d = (k - reach) * h;
    const u = 0.5 * (1 + Math.tanh(d / s.wNm));
    const x = s.fringe.side === "metallic" ? d : -d;
    const half = x === 0 ? 0.5 : 1;
    const phi =
      withFringe && x >= 0
        ? half *
          s.fringe.rad *
          Math.cos((2 * Math.PI * x) / s.fringe.periodNm + s.fringe.phaseRad) *
          Math.exp(-x / s.fringe.decayNm)
        : 0;
    const zr = (1 - u) * a[0] + u * b[0];
    const zi = (1 - u) * a[1] + u * b[1];
    re[k] = zr * Math.cos(phi) - zi * Math.sin(phi);
    im[k] = zr * Math.sin(phi) + zi * Math.cos(phi);
  }
  return (d) => {
    let [sr, si, sw] = [0, 0, 0];
    const from = Math.max(0, Math.ceil(d + reach - 5 * s.sigmaNm));
    const to = Math.min(n - 1, Math.floor(d + reach + 5 * s.sigmaNm));
    for (let k = from; k <= to; k++) {
      const w = Math.exp(-0.5 * ((d - (k - reach)) / s.sigmaNm) ** 2);
      sr += w * re[k];
      si += w * im[k];
      sw += w;
    }
    return [sr / sw, si / sw];
  };
}

/** Largest departure of the optical phase from that of the same wall without a fringe, and where. */
export function seenContrast(s: Scene): { rad: number; offsetNm: number } {
  const [f, bare] = [seen(s, true), seen(s, false)];
  let best = { rad: 0, offsetNm: 0 };
  for (let d = -300; d <= 300; d++) {
    const [a, b] = [f(d), bare(d)];
    const rad = Math.atan2(a[1] * b[0] - a[0] * b[1], a[0] * b[0] + a[1] * b[1]);
    if (Math.abs(rad) > Math.abs(best.rad)) best = { rad, offsetNm: d };
  }
  return best;
}

const tables = new Map<string, [number, number][]>();

/** The signal at −800 … 800 nm, kept for the next frame of the same wall. */
function tableOf(s: Scene): [number, number][] {
  const key = JSON.stringify([s.sigmaNm, s.wNm, s.insulating, s.metallic, s.fringe]);
  let table = tables.get(key);
  if (table === undefined) {
    const profile = seen(s, s.fringe.rad !== 0);
    tables.set(key, (table = Array.from({ length: 1601 }, (_, k) => profile(k - 800))));
  }
  return table;
}

/** One frame with one straight wall through its middle, as the stages before would hand it over. */
export function straightWall(change: Partial<Scene>): { signal: Signal; states: FrameStates; walls: FrameWalls } {
  const s = { ...SCENE, ...change };
  const { rows, cols, pixel } = s;
  const random = makeRandom(s.seed);
  const angle = (s.normalDeg * Math.PI) / 180;
  const [nx, ny] = [Math.cos(angle), Math.sin(angle)];
  const width = (cols - 1) * pixel.xNm;
  const height = (rows - 1) * pixel.yNm;
  const cx = width / 2 + 3.3;
  const cy = height / 2 - 2.1;
  const table = tableOf(s);
  const bare = tableOf({ ...s, fringe: { ...s.fringe, rad: 0 } });
  const at = (d: number, table: [number, number][]): [number, number] => {
    const t = Math.max(0, Math.min(1599.999, d + 800));
    const k = Math.floor(t);
    return [
      table[k][0] + (t - k) * (table[k + 1][0] - table[k][0]),
      table[k][1] + (t - k) * (table[k + 1][1] - table[k][1]),
    ];
  };
  const re = new Float32Array(rows * cols);
  const im = new Float32Array(rows * cols);
  const share = new Float32Array(rows * cols);
  const own = Math.sqrt(1 - s.carry ** 2);
  for (let i = 0; i < rows; i++) {
    const turn = s.rowRad * random.normal();
    let [er, ei] = [random.normal(), random.normal()];
    let [cross, level] = [0, 0];
    for (let j = 0; j < cols; j++) {
      const d = (j * pixel.xNm - cx) * nx + (i * pixel.yNm - cy) * ny;
      const [zr, zi] = at(d, table);
      er = s.carry * er + own * random.normal();
      ei = s.carry * ei + own * random.normal();
      re[i * cols + j] = zr * Math.cos(turn) - zi * Math.sin(turn) + s.noise * er;
      im[i * cols + j] = zr * Math.sin(turn) + zi * Math.cos(turn) + s.noise * ei;
      share[i * cols + j] = d > 0 ? 1 : 0;
      if (s.referencedBeyondNm !== null && Math.abs(d) > s.referencedBeyondNm) {
        const [br, bi] = at(d, bare);
        cross += im[i * cols + j] * br - re[i * cols + j] * bi;
        level += re[i * cols + j] * br + im[i * cols + j] * bi;
      }
    }
    const back = Math.atan2(cross, level);
    for (let p = i * cols; p < (i + 1) * cols; p++) {
      [re[p], im[p]] = [
        re[p] * Math.cos(back) + im[p] * Math.sin(back),
        im[p] * Math.cos(back) - re[p] * Math.sin(back),
      ];
    }
  }
  const points: number[] = [];
  for (let t = -2000; t <= 2000; t += 10) {
    const [x, y] = [cx - t * ny, cy + t * nx];
    if (x >= 0 && y >= 0 && x <= width && y <= height) points.push(x, y);
  }
  const count = points.length / 2;
  const normals = Float64Array.from({ length: 2 * count }, (_, k) => (k % 2 === 0 ? nx : ny));
  const arcNm = Float64Array.from({ length: count }, (_, k) => 10 * k);
  const lengthNm = 10 * (count - 1);
  const noise = { rr: s.noise ** 2, ri: 0, ii: s.noise ** 2 };
  const polar = (l: { amplitude: number; phase: number }) => ({
    re: l.amplitude * Math.cos(l.phase),
    im: l.amplitude * Math.sin(l.phase),
  });
  const fitted: WallProfile = {
    wall: 0,
    profile: 0,
    xNm: cx,
    yNm: cy,
    normalDeg: 0,
    arcNm: lengthNm / 2,
    stretchNm: lengthNm,
    widthNm: null,
    widthSdNm: null,
    widthSdTipNm: null,
    widthUpper95Nm: null,
    resolved: null,
    apparentWidthNm: apparentWidth(s.wNm, s.sigmaNm),
    amplitudeInsulating: null,
    amplitudeMetallic: null,
    reducedChi2: null,
    pixels: rows * cols,
    flag: "",
  };
  return {
    signal: { frame: 0, rows, cols, pixel, re, im, usable: new Uint8Array(rows * cols).fill(1) },
    states: {
      frame: 0,
      levels: {
        frame: 0,
        verdict: "mixed",
        insulating: polar(s.insulating),
        metallic: polar(s.metallic),
        noiseInsulating: noise,
        noiseMetallic: noise,
        noiseCorrelationX: s.carry,
        noiseCorrelationY: 0,
        gain: 1,
        thresholdSd: 0.01,
      },
      share: makeRaster(share, rows, cols, pixel),
      map: { rows, cols, pixel, states: Uint8Array.from(share) },
      fraction: null,
    },
    walls: {
      frame: 0,
      walls: [{ wall: 0, points: Float64Array.from(points), normals, arcNm, closed: false, lengthNm }],
      profiles: [fitted],
      wallLengthNm: lengthNm,
    },
  };
}
