import { expect, test } from "vitest";
import { enclosedArea, lineLength, traceContours } from "../../src/raster/contours.js";
import { fixture } from "./fixture.js";

interface Disc {
  radius: number;
  centre_y_x: [number, number];
  tanh_w: number;
  grid: number;
  contour_points: number;
  contour_length: number;
  true_length: number;
  contour_area: number;
  pixel_edge_length: number;
}
/** The image: a formula with seeded noise, values 0 … 255. */
const { image } = fixture<{ image: number[][] }>("segmentation");
/** Source: what scikit-image 0.19.3 finds on it at level 120.5, low values joined through saddles; and clean discs. */
const published = fixture<{
  contours: [number, number, boolean, number | null][];
  total_length_px: number;
  discs: Disc[];
}>("contours");
const px = { xNm: 1, yNm: 1 };

test("noisy two-state map: points, lengths, openness and areas of every contour", () => {
  const size = image.length;
  const lines = traceContours(Float32Array.from(image.flat()), size, size, px, 120.5, "low")
    .map(({ points, closed }) => ({
      // the published closed contours repeat their first point
      points: points.length / 2 + (closed ? 1 : 0),
      length: lineLength(points, closed),
      closed,
      area: closed ? enclosedArea(points) : null,
    }))
    .sort((a, b) => b.points - a.points);
  expect(lines).toHaveLength(published.contours.length);
  published.contours.forEach(([points, length, closed, area], k) => {
    expect(lines[k].points).toBe(points);
    expect(lines[k].closed).toBe(closed);
    // whole-number pixels are exact in single precision, so only rounding of the sums is left
    expect(Math.abs(lines[k].length / length - 1)).toBeLessThan(1e-9);
    if (area !== null) expect(Math.abs((lines[k].area ?? Number.NaN) / area - 1)).toBeLessThan(1e-9);
  });
  const total = lines.reduce((s, l) => s + l.length, 0);
  expect(Math.abs(total / published.total_length_px - 1)).toBeLessThan(1e-9);
});

test.each(published.discs)("clean disc of radius $radius: published contour; within 1 % of the circle", (d) => {
  const data = new Float32Array(d.grid * d.grid);
  const [cy, cx] = d.centre_y_x;
  for (let i = 0; i < d.grid; i++) {
    for (let j = 0; j < d.grid; j++) {
      data[i * d.grid + j] = (1 + Math.tanh((d.radius - Math.hypot(i - cy, j - cx)) / d.tanh_w)) / 2;
    }
  }
  const [line] = traceContours(data, d.grid, d.grid, px, 0.5, "high");
  const length = lineLength(line.points, true);
  expect(line.points.length / 2 + 1).toBe(d.contour_points);
  // the published values were found on doubles, ours on single-precision pixels
  expect(Math.abs(length / d.contour_length - 1)).toBeLessThan(1e-6);
  expect(Math.abs(enclosedArea(line.points) / d.contour_area - 1)).toBeLessThan(1e-6);
  expect(Math.abs(length / (2 * Math.PI * d.radius) - 1)).toBeLessThan(0.01);
  // what is not done here: pixel edges are 4/π too long however fine the pixels are
  expect(d.pixel_edge_length / d.true_length).toBeGreaterThan(1.2);
});
