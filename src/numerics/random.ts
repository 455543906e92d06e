import { mersenne } from "pure-rand/generator/mersenne";

/** A seeded source of random numbers; the same seed gives the same numbers on every machine. */
export interface Random {
  /** Uniform in (0, 1). */
  uniform(): number;
  /** Standard normal. */
  normal(): number;
  /** Whole number from 0 to n − 1. */
  below(n: number): number;
}

/** Mersenne Twister (Matsumoto & Nishimura 1998, ACM Trans. Model. Comput. Simul. 8, 3); normal deviates by the polar method
 *  (Marsaglia & Bray 1964, SIAM Rev. 6, 260). */
export function makeRandom(seed: number): Random {
  const generator = mersenne(seed | 0);
  let spare = Number.NaN;
  const uniform = (): number => ((generator.next() >>> 0) + 0.5) / 4294967296;
  return {
    uniform,
    normal() {
      if (!Number.isNaN(spare)) {
        const v = spare;
        spare = Number.NaN;
        return v;
      }
      let u: number, v: number, s: number;
      do {
        u = 2 * uniform() - 1;
        v = 2 * uniform() - 1;
        s = u * u + v * v;
      } while (s >= 1 || s === 0);
      const k = Math.sqrt((-2 * Math.log(s)) / s);
      spare = v * k;
      return u * k;
    },
    below: (n) => Math.min(n - 1, Math.floor(uniform() * n)),
  };
}

/** A seed for a part of the work (a frame, a wall), so that results do not depend on the order or on the number of workers. */
export function childSeed(seed: number, ...path: number[]): number {
  let h = seed | 0;
  for (const part of path) {
    h = Math.imul(h ^ (part | 0), 0x9e3779b1);
    h = Math.imul(h ^ (h >>> 15), 0x85ebca6b);
    h ^= h >>> 13;
  }
  return h | 0;
}
