/** CODATA 2018; h, c and e are exact since the 2019 redefinition of the SI. */
const PLANCK_J_S = 6.62607015e-34;
const LIGHT_M_PER_S = 299792458;
const CHARGE_C = 1.602176634e-19;

/** Full width at half maximum of a Gaussian of standard deviation 1: 2√(2 ln 2). */
export const FWHM_PER_SIGMA = 2 * Math.sqrt(2 * Math.LN2);

/** 10–90 % rise of ½(1 + tanh(x/w)) in units of w: ln 9. */
export const RISE_PER_W = Math.log(9);

/** 10–90 % rise of a step blurred by a Gaussian of standard deviation 1: 2·Φ⁻¹(0.9). */
export const RISE_PER_SIGMA = 2 * 1.2815515655446004;

/** Photon energy in meV from a wavenumber in 1/cm. */
export const energyMeVFromWavenumber = (perCm: number): number =>
  ((PLANCK_J_S * LIGHT_M_PER_S * perCm * 100) / CHARGE_C) * 1000;

/** Photon energy in meV from a vacuum wavelength in µm. */
export const energyMeVFromWavelength = (um: number): number =>
  ((PLANCK_J_S * LIGHT_M_PER_S) / (um * 1e-6) / CHARGE_C) * 1000;
