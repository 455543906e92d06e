import type { FringeTable } from "./basis.js";
import type { Chord } from "./chord.js";

/** What is left of a response beyond the basis, relative to it: its share of the drop of χ² is the square of this. */
const LEAST_LEFT = 0.03;

/** The responses to all fringes of the grid on one side of a wall, as sums of a few functions of the distance: periods and decays near each
 *  other look much alike after the tip's blur, and some 20 functions make up 120 responses to within `LEAST_LEFT`. Whatever is done to a
 *  profile (whitening, products) is then done to these few. Orthonormal on the table's own grid; the response worst described so far is
 *  taken next (QR with column pivoting: Businger & Golub 1965, Numer. Math. 7, 269). */
export class SearchBasis {
  readonly size: number;
  /** Coefficients of the responses, row-major [2 · members, size]: the cosine of a member, then its sine. */
  readonly coefficients: Float64Array;
  private readonly functions: readonly Float64Array[];

  constructor(
    private readonly table: FringeTable,
    private readonly metallicSide: boolean,
    chord: Chord,
  ) {
    const many = 2 * table.members.length;
    const left = Array.from({ length: many }, (_, c) => table.responseOnGrid(c >> 1, c % 2, metallicSide, chord));
    const size2 = left.map(square);
    const left2 = Float64Array.from(size2);
    const functions: Float64Array[] = [];
    const rows: number[][] = left.map(() => []);
    for (;;) {
      let worst = -1;
      let most = LEAST_LEFT * LEAST_LEFT;
      for (let c = 0; c < many; c++) {
        if (left2[c] > most * size2[c]) {
          worst = c;
          most = left2[c] / size2[c];
        }
      }
      if (worst < 0) break;
      const scale = 1 / Math.sqrt(square(left[worst]));
      const f = left[worst].map((v) => v * scale);
      functions.push(f);
      for (let c = 0; c < many; c++) {
        const x = left[c];
        let s = 0;
        for (let q = 0; q < f.length; q++) s += f[q] * x[q];
        let rest = 0;
        for (let q = 0; q < f.length; q++) {
          x[q] -= s * f[q];
          rest += x[q] * x[q];
        }
        rows[c].push(s);
        left2[c] = c === worst ? 0 : rest;
      }
    }
    this.functions = functions;
    this.size = functions.length;
    this.coefficients = Float64Array.from(rows.flat());
  }

  /** The functions at signed distances into `out`, row-major [distances, `stride`], from column `offset` on. */
  at(distanceNm: Float64Array, out: Float64Array, stride: number, offset: number): void {
    const { table, functions } = this;
    const last = table.gridPoints - 2;
    for (let k = 0; k < distanceNm.length; k++) {
      const x = this.metallicSide ? distanceNm[k] : -distanceNm[k];
      const t = (x - table.fromNm) / table.stepNm;
      if (t < 0) continue;
      const q = Math.min(Math.floor(t), last);
      const f = Math.min(1, t - q);
      const at = k * stride + offset;
      for (let b = 0; b < functions.length; b++) {
        const v = functions[b];
        out[at + b] = v[q] + f * (v[q + 1] - v[q]);
      }
    }
  }
}

function square(x: Float64Array): number {
  let s = 0;
  for (let k = 0; k < x.length; k++) s += x[k] * x[k];
  return s;
}
