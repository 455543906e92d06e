// Random fields that are known in closed form at every place, so that they can be moved by any part of a pixel.

/** Plane waves of random direction and phase with a spectrum exp(−k²·length²/2), length in pixels; standard deviation 1.
 *  @param period 0: any wave; otherwise only waves that repeat after so many pixels, along both axes */
export function makeField(random, { waves = 150, lengthPx = 4, period = 0 }) {
  const list = Array.from({ length: waves }, () => {
    let kx = random.normal() / lengthPx;
    let ky = random.normal() / lengthPx;
    if (period > 0) {
      const unit = (2 * Math.PI) / period;
      kx = unit * Math.round(kx / unit);
      ky = unit * Math.round(ky / unit);
    }
    return { kx, ky, phase: 2 * Math.PI * random.uniform() };
  });
  const size = Math.sqrt(2 / waves);
  return {
    /** The field with its features moved by +dy rows and +dx columns. */
    render(rows, cols, dy = 0, dx = 0) {
      const out = new Float64Array(rows * cols);
      for (const w of list)
        for (let i = 0, p = 0; i < rows; i++) {
          const along = w.ky * (i - dy) + w.phase;
          for (let j = 0; j < cols; j++, p++) out[p] += size * Math.cos(along + w.kx * (j - dx));
        }
      return out;
    },
  };
}

export const toFloat32 = (values, change = (v) => v) => Float32Array.from(values, (v) => change(v));
