/** Values of a field less its threshold on a grid of square or oblong cells; node (i, j) lies at (x0 + j·dx, y0 + i·dy). */
export interface FieldGrid {
  readonly values: Float64Array;
  readonly nx: number;
  readonly ny: number;
  readonly x0: number;
  readonly y0: number;
  readonly dx: number;
  readonly dy: number;
}

/** Short straight pieces of the level set, each with its neighbours along the line (−1 at an open end). */
export interface LevelSet {
  /** x1, y1, x2, y2 of each piece. */
  readonly pieces: Float64Array;
  /** The piece that touches the first and the second end. */
  readonly links: Int32Array;
  readonly count: number;
  /** Cell (row · nx + column) that each piece lies in. */
  readonly cells: Int32Array;
}

/** Weights of the cubic through nodes −1, 0, 1, 2 at t, and of its derivative. */
function cubicWeights(t: number, w: Float64Array, dw: Float64Array): void {
  const a = t + 1;
  const b = t;
  const c = t - 1;
  const d = t - 2;
  w[0] = -(b * c * d) / 6;
  w[1] = (a * c * d) / 2;
  w[2] = -(a * b * d) / 2;
  w[3] = (a * b * c) / 6;
  dw[0] = -(c * d + b * d + b * c) / 6;
  dw[1] = (c * d + a * d + a * c) / 2;
  dw[2] = -(b * d + a * d + a * b) / 2;
  dw[3] = (b * c + a * c + a * b) / 6;
}

const W = new Float64Array(4);
const DW = new Float64Array(4);
const WY = new Float64Array(4);
const DWY = new Float64Array(4);

/** Root between nodes 0 and 1 of the cubic through four values; p0 and p1 differ in sign. */
function cubicRoot(pm: number, p0: number, p1: number, p2: number): number {
  let low = 0;
  let high = 1;
  let t = p0 / (p0 - p1);
  for (let k = 0; k < 12; k++) {
    cubicWeights(t, W, DW);
    const v = W[0] * pm + W[1] * p0 + W[2] * p1 + W[3] * p2;
    const slope = DW[0] * pm + DW[1] * p0 + DW[2] * p1 + DW[3] * p2;
    if (v > 0 === p0 > 0) low = t;
    else high = t;
    let next = t - v / slope;
    if (!(next >= low && next <= high)) next = 0.5 * (low + high);
    if (Math.abs(next - t) < 1e-9) return next;
    t = next;
  }
  return t;
}

/** The zero line of a smooth field, as pieces about half a cell long. Marching squares (Lorensen & Cline 1987) with each crossing at the
 *  root of the cubic through the four nodes beside it, and each cell's chord broken at a middle point that is moved onto the line
 *  by Newton's method on the bicubic; a saddle is decided by the cell's centre. With cells of a sixteenth of the field's scale c, ends
 *  lie within 1e-4 c of the true line and pieces depart from it by a cell²·curvature/32. */
export function findLevelSet(grid: FieldGrid): LevelSet {
  const { values: v, nx, ny, x0, y0, dx, dy } = grid;
  const vertexOfEdge = new Map<number, number>();
  let capacity = 1024;
  let count = 0;
  let pieces = new Float64Array(4 * capacity);
  let cells = new Int32Array(capacity);
  let ends = new Int32Array(2 * capacity);
  const vertices: number[] = [];

  const crossing = (i: number, j: number, alongX: boolean): number => {
    const key = (alongX ? 0 : nx * ny) + i * nx + j;
    const known = vertexOfEdge.get(key);
    if (known !== undefined) return known;
    const step = alongX ? 1 : nx;
    const at = i * nx + j;
    const inside = alongX ? j > 0 && j + 2 < nx : i > 0 && i + 2 < ny;
    const t = inside ? cubicRoot(v[at - step], v[at], v[at + step], v[at + 2 * step]) : v[at] / (v[at] - v[at + step]);
    const vertex = vertices.length / 2;
    vertices.push(x0 + (alongX ? j + t : j) * dx, y0 + (alongX ? i : i + t) * dy);
    vertexOfEdge.set(key, vertex);
    return vertex;
  };

  const addPiece = (cell: number, a: number, b: number): void => {
    if (count === capacity) {
      capacity *= 2;
      const grow = <T extends Float64Array | Int32Array>(from: T, to: T): T => {
        to.set(from);
        return to;
      };
      pieces = grow(pieces, new Float64Array(4 * capacity));
      cells = grow(cells, new Int32Array(capacity));
      ends = grow(ends, new Int32Array(2 * capacity));
    }
    pieces[4 * count] = vertices[2 * a];
    pieces[4 * count + 1] = vertices[2 * a + 1];
    pieces[4 * count + 2] = vertices[2 * b];
    pieces[4 * count + 3] = vertices[2 * b + 1];
    ends[2 * count] = a;
    ends[2 * count + 1] = b;
    cells[count++] = cell;
  };

  const chord = (i: number, j: number, a: number, b: number): void => {
    let tx = (0.5 * (vertices[2 * a] + vertices[2 * b]) - x0) / dx - j;
    let ty = (0.5 * (vertices[2 * a + 1] + vertices[2 * b + 1]) - y0) / dy - i;
    if (i > 0 && j > 0 && i + 2 < ny && j + 2 < nx) {
      for (let pass = 0; pass < 2; pass++) {
        cubicWeights(tx, W, DW);
        cubicWeights(ty, WY, DWY);
        let f = 0;
        let fx = 0;
        let fy = 0;
        for (let r = 0; r < 4; r++) {
          const base = (i - 1 + r) * nx + j - 1;
          const line = W[0] * v[base] + W[1] * v[base + 1] + W[2] * v[base + 2] + W[3] * v[base + 3];
          f += WY[r] * line;
          fy += DWY[r] * line;
          fx += WY[r] * (DW[0] * v[base] + DW[1] * v[base + 1] + DW[2] * v[base + 2] + DW[3] * v[base + 3]);
        }
        // Steepest way in nm, then back to cells.
        const gx = fx / dx;
        const gy = fy / dy;
        const g2 = gx * gx + gy * gy;
        const mx = (f * gx) / g2 / dx;
        const my = (f * gy) / g2 / dy;
        if (!(mx * mx + my * my < 0.1)) break; // beside a saddle the chord's own middle is as good
        tx -= mx;
        ty -= my;
      }
    }
    const middle = vertices.length / 2;
    vertices.push(x0 + (j + tx) * dx, y0 + (i + ty) * dy);
    addPiece(i * nx + j, a, middle);
    addPiece(i * nx + j, middle, b);
  };

  for (let i = 0; i + 1 < ny; i++) {
    for (let j = 0; j + 1 < nx; j++) {
      const at = i * nx + j;
      const s00 = v[at] > 0;
      const s01 = v[at + 1] > 0;
      const s10 = v[at + nx] > 0;
      const s11 = v[at + nx + 1] > 0;
      if (s00 === s01 && s00 === s10 && s00 === s11) continue;
      const top = s00 !== s01 ? crossing(i, j, true) : -1;
      const bottom = s10 !== s11 ? crossing(i + 1, j, true) : -1;
      const left = s00 !== s10 ? crossing(i, j, false) : -1;
      const right = s01 !== s11 ? crossing(i, j + 1, false) : -1;
      if (top >= 0 && bottom >= 0 && left >= 0 && right >= 0) {
        const centre = 0.25 * (v[at] + v[at + 1] + v[at + nx] + v[at + nx + 1]) > 0;
        if (centre === s00) {
          chord(i, j, top, right);
          chord(i, j, left, bottom);
        } else {
          chord(i, j, top, left);
          chord(i, j, right, bottom);
        }
      } else {
        const two = [top, bottom, left, right].filter((e) => e >= 0);
        chord(i, j, two[0], two[1]);
      }
    }
  }

  const touching = new Int32Array(vertices.length).fill(-1);
  for (let p = 0; p < count; p++) {
    for (let e = 0; e < 2; e++) {
      const slot = 2 * ends[2 * p + e];
      touching[touching[slot] < 0 ? slot : slot + 1] = p;
    }
  }
  const links = new Int32Array(2 * count);
  for (let k = 0; k < 2 * count; k++) {
    const slot = 2 * ends[k];
    links[k] = touching[slot] === k >> 1 ? touching[slot + 1] : touching[slot];
  }
  return { pieces: pieces.slice(0, 4 * count), links, count, cells: cells.slice(0, count) };
}
