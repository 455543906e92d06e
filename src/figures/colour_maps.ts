import { fromLch, type Rgb } from "./colour.js";

/** Colours for values from 0 to 1. */
export type ColourMap = (v: number) => Rgb;

const STEPS = 256;

function tabulated(at: (v: number) => Rgb): ColourMap {
  const table = Array.from({ length: STEPS }, (_, k) => at(k / (STEPS - 1)));
  return (v) => table[Math.min(STEPS - 1, Math.max(0, Math.round(v * (STEPS - 1))))];
}

/** For the amplitude: lightness rises in even steps from dark spruce to pale sand, so that equal steps look equal and grey print keeps them. */
export const AMPLITUDE_MAP = tabulated((v) => fromLch(0.2 + 0.77 * v, 0.035 + 0.32 * v * (1 - v), 215 - 125 * v));

/** For a phase that stays within half a turn: as even as the other, from dark plum to pale rose, so that the two are not mistaken for each other. */
export const PHASE_MAP = tabulated((v) => fromLch(0.2 + 0.77 * v, 0.04 + 0.36 * v * (1 - v), 320 + 60 * v));

/** For a phase that goes round: ends where it begins; darkest at 0 and lightest at half a turn, so that grey print tells near from far. */
export const CYCLIC_PHASE_MAP = tabulated((v) =>
  fromLch(0.66 - 0.2 * Math.cos(2 * Math.PI * (v - 0.5)), 0.1, 300 + 360 * (v - 0.5)),
);

/** For heights. */
export const HEIGHT_MAP = tabulated((v) => fromLch(0.18 + 0.8 * v, 0.012, 80));

/** For widths of walls, drawn as lines with a dark edge over the other maps: from blue over violet to pale pink, away from the greens of the
 *  amplitude, where the walls lie. */
export const WIDTH_MAP = tabulated((v) => fromLch(0.5 + 0.42 * v, 0.2 - 0.06 * v, 258 + 92 * v));
