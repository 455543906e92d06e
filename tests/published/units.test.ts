import { describe, expect, it } from "vitest";
import { energyMeVFromWavelength, energyMeVFromWavenumber } from "../../src/model/units.js";
import { fixture } from "./fixture.js";

// Source: CODATA 2018 through scipy.constants; h, c, e are exact in the SI of 2019.
const { constants, rows } = fixture<{ constants: Record<string, number>; rows: number[][] }>("units");

describe("photon energies, against CODATA", () => {
  it("from wavenumber and from wavelength", () => {
    expect(energyMeVFromWavenumber(1) / constants["meV_per_wavenumber"]).toBeCloseTo(1, 13);
    for (const [energyMeV, perCm, um] of rows) {
      expect(energyMeVFromWavenumber(perCm) / energyMeV).toBeCloseTo(1, 13);
      expect(energyMeVFromWavelength(um) / energyMeV).toBeCloseTo(1, 13);
    }
  });
});
