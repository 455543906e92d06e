import type { Problem } from "../model/errors.js";
import { cooldownSchema } from "./schema.js";
import { isRecord, type YamlDocument } from "./yaml_document.js";

/** What is wrong between keys that are each right in themselves, whatever else is wrong in the file. */
export function crossProblems(doc: YamlDocument): Problem[] {
  const problems: Problem[] = [];
  const { light: lightPart, channels, tip: tipPart } = cooldownSchema.shape;
  const top = isRecord(doc.value) ? doc.value : {};
  const y = {
    light: lightPart.safeParse(top["light"]).data,
    channels: channels.safeParse(top["channels"]).data,
    tip: tipPart.safeParse(top["tip"]).data,
  };
  const light = y.light === undefined ? null : Object.values(y.light).filter((v) => v !== undefined).length;
  if (light !== null && light !== 1) {
    problems.push({
      at: doc.at(["light"]),
      problem: `light with ${light === 0 ? "none" : light} of photon_energy_meV, wavenumber_per_cm and wavelength_um; expected one`,
      fix: light === 0 ? "give one of the three, or leave `light` out" : "keep the one that was measured",
    });
  }
  const topography = y.channels?.topography;
  const volts = topography?.unit === "V";
  if (volts && topography.nm_per_unit === undefined) {
    problems.push({
      at: doc.at(["channels", "topography"]),
      problem: "topography in V without nm_per_unit",
      fix: "add the nm of one volt, for example `nm_per_unit: 120`",
    });
  }
  if (!volts && topography?.nm_per_unit !== undefined) {
    problems.push({
      at: doc.atKey(["channels", "topography"], "nm_per_unit"),
      problem: `nm_per_unit beside the unit ${topography.unit ?? "nm"}`,
      fix: "give it only with `unit: V`",
    });
  }
  if (topography?.nm_per_unit === 0) {
    problems.push({
      at: doc.at(["channels", "topography", "nm_per_unit"]),
      problem: "nm_per_unit is 0; expected the nm of one volt",
      fix: "give the calibration of the scanner",
    });
  }
  const tip = y.tip;
  if (tip?.resolution_sd_nm !== undefined && tip.resolution_sd_nm >= tip.resolution_nm) {
    problems.push({
      at: doc.at(["tip", "resolution_sd_nm"]),
      problem: `a standard deviation of ${tip.resolution_sd_nm} nm on a resolution of ${tip.resolution_nm} nm; expected less`,
      fix: "measure the tip, or leave `tip` out: then only apparent widths are reported",
    });
  }
  return problems;
}
