import type { Notice, RawFrame } from "../model/cooldown.js";
import { colsOf, dataOf, type Raster } from "../model/raster.js";

export type Oddity = Pick<Notice, "code" | "message" | "varies">;

/** In a frame with both states the phase follows the amplitude, the topography hardly does. */
const FOLLOWS = 0.8;
const LESS = 0.4;
/** So large a share of neighbours a whole turn apart has no topography. */
const WRAPPED_SHARE = 1e-3;
const TURN = 2 * Math.PI;

/**
 * Whether the topography looks like an optical phase: its values wrap around a circle, or it follows the amplitude as a phase does where
 * the phase does not. null where nothing says so.
 */
export function swappedChannels({ topography, amplitude, phase }: RawFrame): Oddity | null {
  if (topography === null) return null;
  const wrapped = wrappedShare(topography);
  if (wrapped > WRAPPED_SHARE) {
    const message = "the topography jumps by whole turns, as a wrapped phase does: are the two swapped?";
    return { code: "swapped-channels", message };
  }
  if (phase === null) return null;
  const [t, p] = [correlation(topography, amplitude), correlation(phase, amplitude)];
  if (Math.abs(t) < FOLLOWS || Math.abs(t) - Math.abs(p) < LESS) return null;
  const varies = [t.toFixed(2), p.toFixed(2)];
  return {
    code: "swapped-channels",
    message: `the topography follows the amplitude (correlation ${varies[0]}) as a phase would, the phase does not (${varies[1]}): are the two swapped?`,
    varies,
  };
}

/** Share of the neighbours along a row that lie one turn apart, where all values lie on one turn. */
function wrappedShare(r: Raster): number {
  const data = dataOf(r);
  const cols = colsOf(r);
  let jumps = 0;
  let pairs = 0;
  for (let k = 1; k < data.length; k++) {
    if (Math.abs(data[k]) > TURN + 1e-3) return 0;
    if (k % cols === 0) continue;
    const step = Math.abs(data[k] - data[k - 1]);
    if (Number.isNaN(step)) continue;
    pairs++;
    if (step > TURN - 0.6 && step < TURN + 1e-3) jumps++;
  }
  return pairs === 0 ? 0 : jumps / pairs;
}

/** Pixels looked at: a correlation of many thousands is known to a hundredth. */
const MOST_PIXELS = 20_000;

function correlation(a: Raster, b: Raster): number {
  const u = dataOf(a);
  const v = dataOf(b);
  let n = 0;
  let [su, sv, suu, svv, suv] = [0, 0, 0, 0, 0];
  const u0 = u.find(Number.isFinite) ?? 0;
  const v0 = v.find(Number.isFinite) ?? 0;
  // odd, so that columns of an even number take turns
  const stride = Math.ceil(u.length / MOST_PIXELS) | 1;
  for (let k = 0; k < u.length; k += stride) {
    const x = u[k] - u0;
    const y = v[k] - v0;
    if (!Number.isFinite(x + y)) continue;
    n++;
    su += x;
    sv += y;
    suu += x * x;
    svv += y * y;
    suv += x * y;
  }
  const vu = suu - (su * su) / n;
  const vv = svv - (sv * sv) / n;
  return n > 1 && vu > 0 && vv > 0 ? (suv - (su * sv) / n) / Math.sqrt(vu * vv) : 0;
}
