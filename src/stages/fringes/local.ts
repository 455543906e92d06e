import { shareAt, type Blur } from "./basis.js";
import type { Chord } from "./chord.js";

const STEP_NM = 1;

/** What a pixel is like at a distance from the wall: how far a turn of 1 rad moves it across the chord, and its noise across. Tabulated. */
export class Local {
  private readonly alongTable: Float64Array;
  private readonly sdTable: Float64Array;
  private readonly half: number;

  constructor(
    readonly chord: Chord,
    blur: Blur,
    reachNm: number,
    excess: readonly [number, number] = [1, 1],
  ) {
    this.half = Math.ceil(reachNm / STEP_NM);
    this.alongTable = new Float64Array(2 * this.half + 1);
    this.sdTable = new Float64Array(2 * this.half + 1);
    const scratch = new Float64Array(4);
    for (let k = 0; k < this.alongTable.length; k++) {
      const u = shareAt((k - this.half) * STEP_NM, blur, scratch);
      this.alongTable[k] = (1 - u) * chord.alongInsulating + u * chord.alongMetallic;
      const insulating = chord.noiseInsulating * excess[0];
      const metallic = chord.noiseMetallic * excess[1];
      this.sdTable[k] = Math.sqrt((1 - u) * insulating ** 2 + u * metallic ** 2);
    }
  }

  along(distanceNm: number): number {
    return this.alongTable[this.index(distanceNm)];
  }

  sd(distanceNm: number): number {
    return this.sdTable[this.index(distanceNm)];
  }

  private index(distanceNm: number): number {
    return Math.max(0, Math.min(2 * this.half, Math.round(distanceNm / STEP_NM) + this.half));
  }
}
