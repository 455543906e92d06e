import { describe, expect, test } from "vitest";
import { defaultsOf } from "../../src/model/settings.js";
import { measurePair, prepareForDrift } from "../../src/stages/drift/index.js";
import { settings } from "../../src/stages/drift/settings.js";
import { makeRandom } from "../../src/numerics/random.js";
import { topographyFrame } from "../stages/drift/scene.js";
import { fixture } from "./fixture.js";

type YX = readonly [number, number];
interface Registration {
  readonly references: { readonly open: string; readonly periodic: string };
  readonly pairs: readonly {
    readonly name: string;
    readonly reference: "open" | "periodic";
    readonly drift_px: YX;
    readonly plain_fourier_drift_px: YX;
    readonly masked: {
      readonly reference_missing_rows_cols: readonly [YX, YX];
      readonly moving_missing_rows_cols: readonly [YX, YX];
      readonly "scikit-image masked, whole pixels": YX;
    };
    readonly moving: string;
  }[];
  readonly cramer_rao: {
    readonly noise_sd: number;
    readonly sd_px_two_noisy_frames_y_x: YX;
  };
}
interface Texture {
  readonly reference: string;
  readonly pairs: readonly { readonly drift_px: YX; readonly moving: string }[];
}

/* Sources: images from closed forms, so that the shifts are exact; `plain_fourier_drift_px` is the upsampled cross-correlation of
 * Guizar-Sicairos, Thurman & Fienup 2008, Opt. Lett. 33, 156, and `masked` that of Padfield 2012, IEEE Trans. Image Process. 21, 2706,
 * both as scikit-image 0.19.3 gives them; the bound is Cramér and Rao's, as in Robinson & Milanfar 2004, ibid. 13, 1185. */
const s = defaultsOf(settings);
const pixel = { xNm: 10, yNm: 10 };
const registration = fixture<Registration>("registration");

function counts(text: string): Float32Array {
  const bytes = Buffer.from(text, "base64");
  return Float32Array.from({ length: bytes.length / 2 }, (_, k) => bytes.readUInt16LE(2 * k));
}

function without(data: Float32Array, side: number, [rows, cols]: readonly [YX, YX]): Float32Array {
  const out = data.slice();
  for (let i = rows[0]; i < rows[1]; i++) out.fill(Number.NaN, i * side + cols[0], i * side + cols[1]);
  return out;
}

function driftPx(reference: Float32Array, moving: Float32Array, side: number) {
  const [r, m] = [reference, moving].map((v, k) => prepareForDrift(topographyFrame(k, v, side, side, pixel), s));
  const pair = measurePair(r, m, null, s);
  if (pair.status === "failed") throw new Error(pair.reason);
  return { y: pair.yNm / 10, x: pair.xNm / 10, sdY: Math.sqrt(pair.yyNm2) / 10, sdX: Math.sqrt(pair.xxNm2) / 10 };
}

describe("formula-made pairs with exact shifts", () => {
  // images rounded to whole counts (0.3 of some thousand): 0.01 px is far above that and far below what is at stake
  test.each(registration.pairs)("$name: the shift to 0.01 px, frame edges or not", (p) => {
    const found = driftPx(counts(registration.references[p.reference]), counts(p.moving), 64);
    expect(Math.abs(found.y - p.drift_px[0])).toBeLessThan(0.01);
    expect(Math.abs(found.x - p.drift_px[1])).toBeLessThan(0.01);
  });

  test.each(registration.pairs.filter((p) => p.reference === "periodic"))(
    "$name: what upsampled correlation finds on frames that repeat, to its hundredth of a pixel",
    (p) => {
      const found = driftPx(counts(registration.references.periodic), counts(p.moving), 64);
      expect(Math.abs(found.y - p.plain_fourier_drift_px[0])).toBeLessThan(0.015);
      expect(Math.abs(found.x - p.plain_fourier_drift_px[1])).toBeLessThan(0.015);
    },
  );

  test("where a plain Fourier correlation is wrong by tens of pixels", () => {
    const p = registration.pairs.find((q) => q.name === "open large");
    if (p === undefined) throw new Error("no such pair");
    expect(Math.abs(p.plain_fourier_drift_px[0] - p.drift_px[0])).toBeGreaterThan(20);
    const found = driftPx(counts(registration.references.open), counts(p.moving), 64);
    expect(Math.hypot(found.y - p.drift_px[0], found.x - p.drift_px[1])).toBeLessThan(0.01);
  });

  test.each(registration.pairs)(
    "$name with blocks of pixels missing: the same shift, as masked correlation has it in whole pixels",
    (p) => {
      const found = driftPx(
        without(counts(registration.references[p.reference]), 64, p.masked.reference_missing_rows_cols),
        without(counts(p.moving), 64, p.masked.moving_missing_rows_cols),
        64,
      );
      const whole = p.masked["scikit-image masked, whole pixels"];
      expect(Math.abs(found.y - whole[0])).toBeLessThan(1);
      expect(Math.abs(found.x - whole[1])).toBeLessThan(1);
      expect(Math.abs(found.y - p.drift_px[0])).toBeLessThan(0.02);
      expect(Math.abs(found.x - p.drift_px[1])).toBeLessThan(0.02);
    },
  );
});

test("a gravel texture with aliasing: quarter-pixel shifts, each new at its edge", () => {
  const texture = fixture<Texture>("registration_texture");
  for (const p of texture.pairs) {
    const found = driftPx(counts(texture.reference), counts(p.moving), 56);
    // block averages of a texture finer than the block: what aliases is noise to any method; upsampled correlation is 0.02–0.05 px off
    expect(Math.abs(found.y - p.drift_px[0])).toBeLessThan(0.05);
    expect(Math.abs(found.x - p.drift_px[1])).toBeLessThan(0.05);
  }
});

test("two noisy copies of one image: scatter within 1.5 of the published Cramér–Rao bound, and as promised", () => {
  const { noise_sd, sd_px_two_noisy_frames_y_x: limit } = registration.cramer_rao;
  const clean = counts(registration.references.periodic);
  const trials = 80;
  let y2 = 0;
  let x2 = 0;
  let pull = 0;
  for (let k = 0; k < trials; k++) {
    const random = makeRandom(100 + k);
    const noisy = (): Float32Array => clean.map((v) => v + noise_sd * random.normal());
    const found = driftPx(noisy(), noisy(), 64);
    y2 += found.y ** 2 / trials;
    x2 += found.x ** 2 / trials;
    pull += ((found.y / found.sdY) ** 2 + (found.x / found.sdX) ** 2) / (2 * trials);
  }
  expect(Math.sqrt(y2) / limit[0]).toBeLessThan(1.5);
  expect(Math.sqrt(x2) / limit[1]).toBeLessThan(1.5);
  expect(Math.sqrt(pull)).toBeGreaterThan(0.8);
  expect(Math.sqrt(pull)).toBeLessThan(1.25);
});
