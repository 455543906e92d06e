/* The wall between two states seen through a Gaussian response, u(x; w, σ) = ½(1 + tanh(x/w)) ∗ Gaussian(σ): exact, tabulated for
 * fits, and its 10–90 % rise. */
export { KINK_VARIANCE, kink } from "./kink_exact.js";
export { fastKink, fastKinks } from "./kink_table.js";
export { apparentWidth, apparentWidthWithSlopes, kinkWidthFromApparent, type ApparentWidth } from "./kink_width.js";
