import type { ChannelName } from "../model/cooldown.js";
import { energyMeVFromWavelength, energyMeVFromWavenumber } from "../model/units.js";
import type { ChannelsEntry, CooldownEntry } from "./schema.js";

const NM_PER: Readonly<Record<"nm" | "um" | "m", number>> = { nm: 1, um: 1000, m: 1e9 };

/** What the values of each channel's file are multiplied by: to nm (topography), to rad (phase), 1 for the amplitude. */
export function channelScales(channels: ChannelsEntry | undefined): Record<ChannelName, number> {
  const unit = channels?.topography?.unit ?? "nm";
  return {
    topography: unit === "V" ? (channels?.topography?.nm_per_unit ?? 1) : NM_PER[unit],
    amplitude: 1,
    phase: channels?.phase?.unit === "deg" ? Math.PI / 180 : 1,
  };
}

/** Photon energy in meV from whichever of the three is given; null where none is. */
export function photonEnergyMeV(light: CooldownEntry["light"]): number | null {
  if (light?.photon_energy_meV !== undefined) return light.photon_energy_meV;
  if (light?.wavenumber_per_cm !== undefined) return energyMeVFromWavenumber(light.wavenumber_per_cm);
  if (light?.wavelength_um !== undefined) return energyMeVFromWavelength(light.wavelength_um);
  return null;
}
