// Registration: upsampled cross-correlation, masked correlation, and masked least squares on splines, against ours.
import { measurePair, prepareForDrift } from "../../dist/stages/drift/index.js";
import { settings } from "../../dist/stages/drift/settings.js";
import { defaultsOf } from "../../dist/model/settings.js";
import { makeRaster } from "../../dist/model/raster.js";
import { makeField, toFloat32 } from "./fields.mjs";
import { row } from "./rows.mjs";

const SIDE = 96;
const PIXEL = { xNm: 1, yNm: 1 };
const PAIRS = 6;
const NOISE = 0.05;
export const UPSAMPLING = 100;

const cleanFrame = (frame, data) => ({
  frame,
  pixel: PIXEL,
  topography: makeRaster(data, SIDE, SIDE, PIXEL),
  amplitude: makeRaster(new Float32Array(data.length).fill(1), SIDE, SIDE, PIXEL),
  phase: null,
});

function ours(reference, moving) {
  const s = defaultsOf(settings);
  const pair = measurePair(
    prepareForDrift(cleanFrame(0, reference), s),
    prepareForDrift(cleanFrame(1, moving), s),
    null,
    s,
  );
  if (pair.status === "failed") return null;
  return { y: pair.yNm, x: pair.xNm, sdY: Math.sqrt(pair.yyNm2), sdX: Math.sqrt(pair.xxNm2) };
}

/** Blocks that were not measured: a few rows across, and a rectangle; other ones in each frame. */
function block(random, data) {
  const out = data.slice();
  const rows = 4 + random.below(10);
  const top = random.below(SIDE - rows);
  out.fill(Number.NaN, top * SIDE, (top + rows) * SIDE);
  const side = 12 + random.below(16);
  const i0 = random.below(SIDE - side);
  const j0 = random.below(SIDE - side);
  for (let i = i0; i < i0 + side; i++) out.fill(Number.NaN, i * SIDE + j0, i * SIDE + j0 + side);
  return out;
}

export function makeRegistration(random, put) {
  const pairs = [];
  for (let k = 0; k < PAIRS; k++) {
    const periodic = makeField(random, { period: SIDE, lengthPx: 3 });
    const shift = () => 16 * (random.uniform() - 0.5);
    const small = [shift(), shift()];
    const a = toFloat32(periodic.render(SIDE, SIDE));
    const b = toFloat32(periodic.render(SIDE, SIDE, ...small));

    const open = makeField(random, { lengthPx: 3 });
    const large = [2.5 * shift(), 2.5 * shift()];
    const noisy = (v) => v + NOISE * random.normal();
    const c = block(random, toFloat32(open.render(SIDE, SIDE), noisy));
    const d = block(random, toFloat32(open.render(SIDE, SIDE, ...large), noisy));
    for (const [name, data] of Object.entries({ a, b, c, d })) put(`pair${k}${name}`, data, [SIDE, SIDE]);
    pairs.push({ small, large, plain: ours(a, b), masked: ours(c, d) });
  }
  return {
    input: { pairs: PAIRS, upsampling: UPSAMPLING },
    compare(theirs) {
      const worst = (list, of) => list.reduce((m, p, k) => Math.max(m, p === null ? Infinity : of(p, k)), 0);
      const plain = pairs.map((p) => p.plain);
      const masked = pairs.map((p) => p.masked);
      const apart = (p, q) => Math.max(Math.abs(p.y - q[0]), Math.abs(p.x - q[1]));
      const inSd = (p, q) => Math.max(Math.abs(p.y - q[0]) / p.sdY, Math.abs(p.x - q[1]) / p.sdX);
      return [
        row(
          "drift of periodic images, px: upsampled phase_cross_correlation",
          2 * PAIRS,
          worst(plain, (p, k) => apart(p, theirs.plain[k])),
          0.02,
          "theirs is a multiple of 1/100 px and circular; ours leaves out what left the frame",
        ),
        row(
          "the same against the exact shift, px",
          2 * PAIRS,
          worst(plain, (p, k) => apart(p, [-pairs[k].small[0], -pairs[k].small[1]])),
          0.01,
          "no noise: interpolation alone",
        ),
        row(
          "drift with masks, px: phase_cross_correlation with masks",
          2 * PAIRS,
          worst(masked, (p, k) => apart(p, theirs.masked[k])),
          1,
          "theirs is in whole pixels; the top of a peak off the grid may be a pixel beside",
        ),
        row(
          "drift with masks, in our standard deviations: least_squares on splines",
          2 * PAIRS,
          worst(masked, (p, k) => inSd(p, theirs.refined[k])),
          4,
          "the same noise in both, weighed otherwise (we blur, and free each row's offset)",
        ),
        row(
          "drift with masks against the exact shift, in our standard deviations",
          2 * PAIRS,
          worst(masked, (p, k) => inSd(p, [-pairs[k].large[0], -pairs[k].large[1]])),
          4.5,
          "normal errors: twelve beyond 4.5 once in 12,000 runs",
        ),
      ];
    },
  };
}
