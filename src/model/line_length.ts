/** Length of a smooth line through points at near even spacing, at each point and in all. Each step counts as the circular arc through
 *  its turning angle, not as the chord; a turn of a radian or more is a kink, and no arc. An end of an open line has a one-sided tangent.
 *  @param points interleaved x, y; a closed line does not repeat its first point
 *  @returns `arc` from the first point, and `length` of the whole (closed lines: with the step back to the first point); in the unit of `points` */
export function lineLength(points: ArrayLike<number>, closed: boolean): { arc: Float64Array; length: number } {
  const count = points.length >> 1;
  const tangents = lineTangents(points, closed);
  const arc = new Float64Array(count);
  let length = 0;
  for (let k = 1; k < count; k++) {
    length += arcStep(points, tangents, k - 1, k);
    arc[k] = length;
  }
  if (closed && count > 1) length += arcStep(points, tangents, count - 1, 0);
  return { arc, length };
}

/** Unit tangents interleaved, each along the line from the neighbour before to the neighbour after. */
export function lineTangents(points: ArrayLike<number>, closed: boolean): Float64Array {
  const count = points.length >> 1;
  const tangents = new Float64Array(2 * count);
  for (let k = 0; k < count; k++) {
    const a = k > 0 ? k - 1 : closed ? count - 1 : 0;
    const b = k + 1 < count ? k + 1 : closed ? 0 : count - 1;
    const tx = points[2 * b] - points[2 * a];
    const ty = points[2 * b + 1] - points[2 * a + 1];
    const norm = Math.hypot(tx, ty) || 1;
    tangents[2 * k] = tx / norm;
    tangents[2 * k + 1] = ty / norm;
  }
  return tangents;
}

function arcStep(p: ArrayLike<number>, t: Float64Array, a: number, b: number): number {
  const chord = Math.hypot(p[2 * b] - p[2 * a], p[2 * b + 1] - p[2 * a + 1]);
  const turn = Math.atan2(
    t[2 * a] * t[2 * b + 1] - t[2 * a + 1] * t[2 * b],
    t[2 * a] * t[2 * b] + t[2 * a + 1] * t[2 * b + 1],
  );
  return chord * (Math.abs(turn) < 1 ? 1 + (turn * turn) / 24 : 1);
}
